package main

import (
	"encoding/json"
	"flag"
	"fmt"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"github.com/rogpeppe/go-internal/testscript"
)

func TestMain(m *testing.M) {
	// The scripts of sweeps wait for meters most of the time.
	if err := flag.Set("test.parallel", "6"); err != nil {
		panic(err)
	}
	testscript.Main(m, map[string]func(){"gatesill": main})
}

// buildProgram builds the program as it is released and gives its folder, which
// goes with the test, and its path.
func buildProgram(t *testing.T) (dir, bin string) {
	t.Helper()
	if testing.Short() {
		t.Skip("builds the program")
	}
	dir = t.TempDir()
	bin = filepath.Join(dir, "gatesill")
	build := exec.Command("go", "build", "-o", bin, ".")
	build.Env = append(os.Environ(), "CGO_ENABLED=0")
	if out, err := build.CombinedOutput(); err != nil {
		t.Fatalf("build: %v\n%s", err, out)
	}
	return dir, bin
}

// TestScripts runs testdata/cli: one text script a behaviour. Besides the usual
// commands they know
//
//	json PATH VALUE [TOLERANCE]   the last stdout as JSON has this value there
//	code N command...             the command ends in exit code N
//	cut N SIGNAL CODE command...  the command gets the signal when the store holds N readings, and ends in
//	                              exit code CODE; what it says is in the files stdout and stderr
//	supplies off                  the last that the supplies of a simulated bench heard left both outputs off
//	sweeps N DEVICE...            the sweeps in the store that count are of these devices, with at least N readings each
//
// PATH is keys and indexes joined by '/'; VALUE is a number, a text, null, true
// or false, or len=N for the length of a list or object.
func TestScripts(t *testing.T) {
	root, err := filepath.Abs("../..")
	if err != nil {
		t.Fatal(err)
	}
	testscript.Run(t, testscript.Params{
		Dir: filepath.Join(root, "testdata", "cli"),
		Setup: func(env *testscript.Env) error {
			env.Setenv("SCENARIOS", filepath.Join(root, "testdata", "scenarios"))
			env.Setenv("SPICE", filepath.Join(root, "testdata", "spice"))
			env.Setenv("FAULTS", filepath.Join(root, "testdata", "faults"))
			env.Setenv("LOGS", filepath.Join(root, "testdata", "logs"))
			env.Setenv("GATESILL_STORE", filepath.Join(env.WorkDir, "store.db"))
			env.Setenv("HOME", env.WorkDir)
			return nil
		},
		Cmds: map[string]func(*testscript.TestScript, bool, []string){
			"json": jsonCmd, "code": codeCmd, "cut": cutCmd, "supplies": suppliesCmd, "sweeps": sweepsCmd,
		},
		RequireExplicitExec: true,
		UpdateScripts:       os.Getenv("GATESILL_UPDATE") != "",
	})
}

// codeCmd wants a certain exit code.
func codeCmd(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) < 2 {
		ts.Fatalf("usage: code N command...")
	}
	err := ts.Exec(args[1], args[2:]...)
	got := 0
	if err != nil {
		var exit interface{ ExitCode() int }
		if !asExit(err, &exit) {
			ts.Fatalf("%v", err)
		}
		got = exit.ExitCode()
	}
	if strconv.Itoa(got) != args[0] {
		ts.Fatalf("exit code %d, want %s", got, args[0])
	}
}

func asExit(err error, dst *interface{ ExitCode() int }) bool {
	e, ok := err.(interface{ ExitCode() int })
	*dst = e
	return ok
}

func jsonCmd(ts *testscript.TestScript, neg bool, args []string) {
	if len(args) < 2 || len(args) > 3 {
		ts.Fatalf("usage: json PATH VALUE [TOLERANCE]")
	}
	var doc any
	if err := json.Unmarshal([]byte(ts.ReadFile("stdout")), &doc); err != nil {
		ts.Fatalf("stdout is no JSON: %v", err)
	}
	v, err := at(doc, args[0])
	if err == nil {
		err = compare(v, args[1:])
	}
	if neg && err == nil {
		ts.Fatalf("%s is %s", args[0], args[1])
	}
	if !neg && err != nil {
		ts.Fatalf("%s: %v", args[0], err)
	}
}

func at(v any, path string) (any, error) {
	for _, key := range strings.Split(path, "/") {
		switch x := v.(type) {
		case map[string]any:
			next, ok := x[key]
			if !ok {
				return nil, fmt.Errorf("no key %q", key)
			}
			v = next
		case []any:
			i, err := strconv.Atoi(key)
			if err != nil { // by the name of the device, bin, ... in it
				i = -1
				for j, e := range x {
					m, _ := e.(map[string]any)
					for _, name := range []string{"device", "bin", "candidate", "lot", "test", "option"} {
						if m[name] == key {
							i = j
						}
					}
				}
			}
			if i < 0 || i >= len(x) {
				return nil, fmt.Errorf("no element %q of %d", key, len(x))
			}
			v = x[i]
		default:
			return nil, fmt.Errorf("%q goes into %v", key, v)
		}
	}
	return v, nil
}

func compare(v any, want []string) error {
	if n, ok := strings.CutPrefix(want[0], "len="); ok {
		l := -1
		switch x := v.(type) {
		case []any:
			l = len(x)
		case map[string]any:
			l = len(x)
		}
		if strconv.Itoa(l) != n {
			return fmt.Errorf("length %d, want %s", l, n)
		}
		return nil
	}
	if x, ok := v.(float64); ok {
		w, err := strconv.ParseFloat(want[0], 64)
		if err != nil {
			return fmt.Errorf("%v, want %s", v, want[0])
		}
		tol := 0.0
		if len(want) == 2 {
			if tol, err = strconv.ParseFloat(want[1], 64); err != nil {
				return err
			}
		}
		if !(math.Abs(x-w) <= tol) {
			return fmt.Errorf("%v, want %v ± %v", x, w, tol)
		}
		return nil
	}
	s := fmt.Sprint(v)
	if v == nil {
		s = "null"
	}
	if s != want[0] {
		return fmt.Errorf("%q, want %q", s, want[0])
	}
	return nil
}
