//go:build linux

package main

import (
	"bytes"
	"compress/gzip"
	"fmt"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"
)

// TestHostileFiles imports files that nobody means well with. Each must end
// with exit code 0 or 1 (no panic is 0 or 1), within ten seconds and 300 MB,
// and say in words what it is when it is refused; nothing of it may reach the
// terminal as a control character.
func TestHostileFiles(t *testing.T) {
	dir, bin := buildProgram(t)
	rng := rand.New(rand.NewPCG(1, 2))
	noise := make([]byte, 1<<20)
	for i := range noise {
		noise[i] = byte(rng.Uint32())
	}
	var zipped bytes.Buffer
	z := gzip.NewWriter(&zipped)
	fmt.Fprint(z, "device,vg_V,id_A\nD1,1,2\n")
	z.Close()
	long := func(n int) string { return strings.Repeat("9", n) }
	good := "device,vg_V,id_A\nD1,2.8,0.001\nD1,2.9,0.01\nD1,3.0,0.02\nD1,3.1,0.05\n"
	for _, c := range []struct {
		name, text string
		refused    bool // must end in 1
	}{
		{"empty.csv", "", true},
		{"noise.csv", string(noise), true},
		{"nul.csv", "device,vg_V,id_A\nD1,2.8\x00,0.001\n", true},
		{"zipped.csv.gz", zipped.String(), true},
		{"megabyte_line.csv", "device,vg_V,id_A\nD1," + strings.Repeat("x", 5<<20) + ",1\n", true},
		{"no_newline.csv", strings.Repeat("a", 50<<20), true},
		{"columns.csv", "vg_V" + strings.Repeat(",c", 100_000) + "\n1" + strings.Repeat(",2", 100_000) + "\n", true},
		{"million_digits.csv", "device,vg_V,id_A\nD1," + long(1_000_000) + ",1\n", true},
		{"huge.csv", "device,vg_V,id_A\nD1,1e308,1e308\nD1,1e309,1\nD1,1e999999999999,1\n", true},
		{"open_quote.csv", "device,vg_V,id_A\n\"D1,2.8,0.001\n" + strings.Repeat("D1,2.9,0.01\n", 100_000), false},
		{"escapes.csv", "device,vg_V,id_A\n\x1b[2J\x1b]0;x\a,2.8,0.001\n\x1b[31mD2,2.9,0.01\n", true},
		{"header_escapes.csv", "device\x1b[2J,vg_V,id_A\n" + good, false},
		{"truncated.csv", good + "D1,3.", false},
		{"formula.csv", strings.ReplaceAll(good, "D1", `"=HYPERLINK(""x"")"`), false},
		{"pathlike.csv", strings.ReplaceAll(good, "D1", "../../etc/passwd"), false},
		{"markup.csv", strings.ReplaceAll(good, "D1", "<script>alert(1)</script>"), false},
	} {
		t.Run(c.name, func(t *testing.T) {
			path := filepath.Join(dir, c.name)
			if err := os.WriteFile(path, []byte(c.text), 0o644); err != nil {
				t.Fatal(err)
			}
			runHostile(t, bin, dir, path, c.refused)
		})
	}
	t.Run("folder", func(t *testing.T) { runHostile(t, bin, dir, dir, true) })
	t.Run("absent", func(t *testing.T) { runHostile(t, bin, dir, filepath.Join(dir, "absent.csv"), true) })
}

func runHostile(t *testing.T, bin, dir, path string, refused bool) {
	t.Helper()
	store := filepath.Join(t.TempDir(), "s.db")
	cmd := exec.Command(bin, "--store", store, "import", "lot", path, "--circuit", "diode")
	cmd.Dir = dir
	var out, errs bytes.Buffer
	cmd.Stdout, cmd.Stderr = &out, &errs
	start := time.Now()
	err := cmd.Run()
	took := time.Since(start)
	code := cmd.ProcessState.ExitCode()
	if code != 0 && code != 1 {
		t.Fatalf("exit code %d (%v)\n%s", code, err, head(errs.String()))
	}
	if refused && code != 1 {
		t.Errorf("taken: %s", head(out.String()))
	}
	if code == 1 && !strings.Contains(errs.String(), "gatesill: error: ") {
		t.Errorf("refused without a word: %s", head(errs.String()))
	}
	if strings.Contains(errs.String(), "goroutine ") {
		t.Errorf("panic:\n%s", head(errs.String()))
	}
	if i := strings.IndexFunc(out.String()+errs.String(), func(r rune) bool { return r < ' ' && r != '\n' || r == 0x7f || r >= 0x80 && r < 0xa0 }); i >= 0 {
		t.Errorf("control character reaches the terminal: %q", head((out.String() + errs.String())[max(0, i-20):]))
	}
	for _, line := range strings.Split(errs.String(), "\n") {
		if len(line) > 1000 {
			t.Errorf("line of %d bytes on stderr", len(line))
		}
	}
	if took > 10*time.Second {
		t.Errorf("took %v", took)
	}
	if peak := cmd.ProcessState.SysUsage().(*syscall.Rusage).Maxrss >> 10; peak > 300 {
		t.Errorf("peak memory %d MB", peak)
	}
	if _, err := os.Stat(store); refused && err == nil {
		t.Error("a store is left behind")
	}
}

func head(s string) string { return s[:min(len(s), 400)] }
