package keeper

import (
	"context"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"os"
	"os/signal"
	"strconv"
	"strings"
	"syscall"
	"testing"
	"time"

	"gatesill/acquire/port"
)

// role makes the test binary another program: the keeper, or a measuring program.
const (
	role       = "GATESILL_KEEPER_TEST_ROLE"
	assignment = "GATESILL_KEEPER_TEST_WORK"
)

func TestMain(m *testing.M) {
	switch os.Getenv(role) {
	case "keeper":
		os.Exit(Main(os.Stdin, os.Stdout))
	case "measure":
		os.Exit(measure())
	}
	flag.Parse()
	flag.Set("test.parallel", "16") // these tests wait far more than they compute
	os.Exit(m.Run())
}

// work is what a measuring program is told.
type work struct {
	Config Config
	Meter  string        // its line
	Gate   float64       // V, set before measuring
	Most   float64       // a reading above it ends the work
	Silent time.Duration // so long without a reading does too
}

func startKeeper(ctx context.Context, c Config) (*Keeper, error) {
	exe, err := os.Executable()
	if err != nil {
		return nil, err
	}
	return Start(ctx, exe, nil, []string{role + "=keeper"}, c)
}

// measure is a measuring program as it should be: its loop reads a meter, beats, and
// orders the off state for a limit, a lost meter and a silent one. Some words on the
// meter's line make it fail in ways that it does not know of.
func measure() int {
	var w work
	if err := json.Unmarshal([]byte(os.Getenv(assignment)), &w); err != nil {
		panic(err)
	}
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	k, err := startKeeper(ctx, w.Config)
	if err != nil {
		fmt.Println("start:", err)
		return 1
	}
	meter, err := port.Open(w.Meter, port.Settings{})
	if err != nil {
		fmt.Println("meter:", err)
		return 1
	}
	if w.Config.Drain != nil {
		err = k.Drain(true)
	}
	if err == nil {
		_, err = k.Set(w.Gate)
	}
	if err != nil {
		fmt.Println("drive:", err)
		return 1
	}
	fmt.Println("keeper", k.cmd.Process.Pid)
	reason := loop(ctx, k, meter, w)
	r, err := k.Off(reason, false)
	fmt.Printf("off %+v %v\n", r, err)
	if err := k.Close(); err != nil {
		fmt.Println("close:", err)
		return 1
	}
	return 0
}

func loop(ctx context.Context, k *Keeper, meter port.Conn, w work) (reason string) {
	var got []byte
	buf := make([]byte, 256)
	last := time.Now()
	for ctx.Err() == nil {
		n, err := meter.Read(buf)
		if err != nil {
			return "meter lost: " + err.Error()
		}
		if err := k.Beat(); err != nil {
			return err.Error()
		}
		got = append(got, buf[:n]...)
		for {
			line, rest, whole := strings.Cut(string(got), "\n")
			if !whole {
				break
			}
			got = []byte(rest)
			last = time.Now()
			switch line {
			case "panic":
				go func() { panic(errors.New("a fault of the measuring program's, as this test wants it")) }()
				select {}
			case "hang":
				select {}
			case "busy": // orders one after the other, beside the loop
				go func() {
					for i := 0; ; i++ {
						if _, err := k.Set(w.Gate + float64(i%2)/10); err != nil {
							return
						}
					}
				}()
				continue
			}
			if v, err := strconv.ParseFloat(line, 64); err != nil || v > w.Most {
				return "limit: " + line
			}
		}
		if time.Since(last) > w.Silent {
			return "meter silent"
		}
	}
	return "stopped"
}
