package table

import (
	"flag"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"gatesill/store/record"
)

var update = flag.Bool("update", false, "write what is read from the sample tables beside them")

// The sample tables, each with what is read from it written beside it.
func TestSamples(t *testing.T) {
	dir := filepath.Join("..", "..", "testdata", "table")
	entries, err := os.ReadDir(dir)
	if err != nil {
		t.Fatal(err)
	}
	options := map[string]Options{"spots-threshold.csv": {SpotCurrent: record.Known(250e-6)}}
	seen := 0
	for _, e := range entries {
		name := e.Name()
		if name == "README.md" || strings.HasSuffix(name, ".want") {
			continue
		}
		seen++
		t.Run(name, func(t *testing.T) {
			f, err := ReadFile(filepath.Join(dir, name), options[name])
			if err != nil {
				t.Fatalf("%v (hint: %s)", err, hintOf(err))
			}
			checkFile(t, f)
			path := filepath.Join(dir, name+".want")
			if *update {
				if err := os.WriteFile(path, []byte(show(f)), 0o644); err != nil {
					t.Fatal(err)
				}
			}
			want, err := os.ReadFile(path)
			if err != nil {
				t.Fatal(err)
			}
			checkShow(t, f, string(want))
		})
	}
	if seen != 9 {
		t.Errorf("%d sample tables", seen)
	}
}
