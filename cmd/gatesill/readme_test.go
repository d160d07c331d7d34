package main

import (
	"bytes"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
)

// TestReadme runs the commands of README's session in their order and wants
// their output to be what is shown there. GATESILL_UPDATE=1 writes it anew.
func TestReadme(t *testing.T) {
	dir, _ := buildProgram(t)
	have, err := os.ReadFile("../../README.md")
	if err != nil {
		t.Fatal(err)
	}
	const prompt = "    $ gatesill "
	var want strings.Builder
	lines := strings.Split(string(have), "\n")
	for i := 0; i < len(lines); i++ {
		want.WriteString(lines[i] + "\n")
		words, ok := strings.CutPrefix(lines[i], prompt)
		if !ok {
			continue
		}
		for i+1 < len(lines) && strings.HasPrefix(lines[i+1], "    ") && !strings.HasPrefix(lines[i+1], prompt) || i+2 < len(lines) && lines[i+1] == "" && strings.HasPrefix(lines[i+2], "    ") && !strings.HasPrefix(lines[i+2], prompt) {
			i++
		}
		want.WriteString(shown(t, dir, strings.Fields(words)))
	}
	text := strings.TrimSuffix(want.String(), "\n")
	if text == string(have) {
		return
	}
	if os.Getenv("GATESILL_UPDATE") != "" {
		if err := os.WriteFile("../../README.md", []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
		return
	}
	t.Errorf("README shows other output than the program gives; it gives:\n%s", text)
}

// shown runs one command from the top of the project and gives its output as
// README shows it.
func shown(t *testing.T, dir string, args []string) string {
	t.Helper()
	for i := range args {
		if strings.HasSuffix(args[i], ".html") {
			args[i] = filepath.Join(dir, args[i])
		}
	}
	cmd := exec.Command(filepath.Join(dir, "gatesill"), args...)
	cmd.Dir = "../.."
	cmd.Env = append(os.Environ(), "GATESILL_STORE="+filepath.Join(dir, "s.db"))
	var out bytes.Buffer
	cmd.Stdout, cmd.Stderr = &out, &out
	if err := cmd.Run(); err != nil {
		t.Fatalf("gatesill %s: %v\n%s", strings.Join(args, " "), err, out.String())
	}
	var b strings.Builder
	for _, l := range strings.Split(strings.TrimRight(strings.ReplaceAll(out.String(), dir+string(filepath.Separator), ""), "\n"), "\n") {
		b.WriteString(strings.TrimRight("    "+l, " ") + "\n")
	}
	return b.String()
}
