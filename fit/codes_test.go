package fit

import (
	"go/ast"
	"go/parser"
	"go/token"
	"strconv"
	"strings"
	"testing"
)

// codeConstants reads the values of all constants named Code… in codes.go.
func codeConstants(t *testing.T) map[string]string {
	t.Helper()
	f, err := parser.ParseFile(token.NewFileSet(), "codes.go", nil, 0)
	if err != nil {
		t.Fatal(err)
	}
	all := map[string]string{}
	ast.Inspect(f, func(n ast.Node) bool {
		v, ok := n.(*ast.ValueSpec)
		if !ok {
			return true
		}
		for k, name := range v.Names {
			if !strings.HasPrefix(name.Name, "Code") || k >= len(v.Values) {
				continue
			}
			if lit, ok := v.Values[k].(*ast.BasicLit); ok && lit.Kind == token.STRING {
				s, err := strconv.Unquote(lit.Value)
				if err != nil {
					t.Fatal(err)
				}
				all[name.Name] = s
			}
		}
		return true
	})
	return all
}

func TestEveryCodeIsExplained(t *testing.T) {
	constants := codeConstants(t)
	if len(constants) < 30 {
		t.Fatalf("found only %d code constants", len(constants))
	}
	seen := map[string]bool{}
	for name, code := range constants {
		info, ok := Explain(code)
		if !ok {
			t.Errorf("%s (%s) is not in Codes", name, code)
			continue
		}
		for _, s := range []string{info.Meaning, info.Next} {
			if !strings.HasSuffix(s, ".") || len(s) < 10 {
				t.Errorf("%s: not a sentence: %q", code, s)
			}
		}
		seen[code] = true
	}
	for _, c := range Codes {
		if !seen[c.Code] {
			t.Errorf("%s is in Codes but no constant", c.Code)
		}
	}
	if len(Codes) != len(constants) {
		t.Errorf("%d entries for %d constants", len(Codes), len(constants))
	}
	if _, ok := Explain("no such code"); ok {
		t.Error("a code that does not exist is explained")
	}
}
