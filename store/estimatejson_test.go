package store

import (
	"encoding/json"
	"reflect"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/store/record"
)

func TestEstimatesAsJSON(t *testing.T) {
	n := record.Known
	values := map[string]record.Value{
		"b_V":          {Value: n(3.25), U: n(1e-9), UBetween: n(0), UAbsolute: n(-4), N: 12},
		"a_A":          {Value: n(1), N: -1},
		"nothing":      {},
		"quote\" \\ é": {U: n(2)},
	}
	want := `{"a_A":{"value":1,"n":-1},"b_V":{"value":3.25,"u":1e-09,"u_between":0,"u_absolute":-4,"n":12},"nothing":{},"quote\" \\ é":{"u":2}}`
	got := string(appendEstimates(nil, values))
	require.Equal(t, want, got)
	back, err := parseEstimates(got)
	require.NoError(t, err)
	require.Equal(t, values, back)
	require.Equal(t, "{}", string(appendEstimates(nil, nil)))
	_, err = parseEstimates(`{"a":{"value":1}`)
	require.Error(t, err)
}

// FuzzParseEstimates holds the direct reader against encoding/json.
func FuzzParseEstimates(f *testing.F) {
	for _, s := range []string{`{}`, `{"a":{}}`, `{"a":{"value":1,"u":null,"n":3},"b":{"u_between":-1.5e-3,"u_absolute":2}}`, `{"a":{"n":1.5}}`,
		`{"a":{"n":null}}`, `{"a":{"VALUE":1}}`, `{"a":{"value":1},"a":{"u":2}}`, `{"a\n":{}}`, "{\"\x10\":{}}", `{ "a":{}}`, `{"a":null}`, `{"a":{"x":1}}`, `{},`} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		p := estimateParser{text: []byte(text)}
		got := p.all()
		if p.other {
			return // encoding/json reads it
		}
		var want map[string]record.Value
		if err := json.Unmarshal([]byte(text), &want); err != nil || !reflect.DeepEqual(got, want) {
			t.Errorf("%q is read as %v; encoding/json says %v, %v", text, got, want, err)
		}
	})
}
