package job

import (
	"os"
	"testing"

	"gatesill/acquire/keeper"
	"gatesill/acquire/rehearsal"
)

// TestMain lets the test binary be what the program starts of itself: what it is
// started as stands in its first argument, as with the program.
func TestMain(m *testing.M) {
	if len(os.Args) > 1 {
		switch os.Args[1] {
		case RehearsalVerb:
			os.Exit(rehearsal.Main(os.Stdin, os.Stdout))
		case KeeperVerb:
			os.Exit(keeper.Main(os.Stdin, os.Stdout))
		}
	}
	os.Exit(m.Run())
}
