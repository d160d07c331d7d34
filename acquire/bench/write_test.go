package bench

import (
	"fmt"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"gatesill/store/record"
)

// answerAll answers every question as pick says, and checks each answer at once.
func answerAll(t require.TestingT, found []Found, pick func(Question) string) Answers {
	a := Answers{}
	for i := 0; ; i++ {
		q, more := Next(found, a)
		if !more {
			return a
		}
		if i > 300 {
			require.Fail(t, "questions without end", q.Key)
		}
		got, err := q.Check(pick(q))
		require.NoError(t, err, q.Key)
		require.NotContains(t, a, q.Key)
		a[q.Key] = got
	}
}

func TestWrite(t *testing.T) {
	found := []Found{{Path: "/dev/serial/by-id/usb-lead-1", Text: "adapter"}, {Path: "/dev/serial/by-id/usb-printer"}, {Path: "/dev/serial/by-id/usb-columns"}}
	answers := map[string]string{
		"name": `the "attic" \bench`, "line 1: speaks": "fs9721", "line 1: role 1": "gate", "line 1: name 1": "", "line 1: isolated": "yes",
		"line 2: speaks": "skip", "line 3: speaks": "text", "line 3: settings": "115200 8N1", "line 3: columns": "3", "line 3: role 1": "load", "line 3: role 2": "none",
		"line 3: role 3": "current", "line 3: unit 3": "mA", "line 3: isolated": "no", "line 4": "tcp:192.0.2.7", "line 4: speaks": "scpi", "line 4: role 1": "drain", "line 4: isolated": "unsure", "kind": "load", "rl": "10 ohm", "rl_rating": "50 W", "vdd": "12", "vgs": "10 V", "pd": "none",
	}
	a := answerAll(t, found, func(q Question) string { return answers[q.Key] })
	b, err := Parse([]byte(Write(found, a)))
	require.NoError(t, err)
	require.NoError(t, b.Live())
	require.Equal(t, answers["name"], b.Name)
	require.Equal(t, record.Known(12), b.Given.VDD)
	require.Equal(t, record.Known(10), b.Limits.Vgs)
	require.False(t, b.Limits.PD.IsKnown())
	require.Len(t, b.Meters, 4)
	require.Equal(t, []any{"tcp:192.0.2.7", "", "V"}, []any{b.Lines[3].Path, b.Lines[3].Settings, b.Lines[3].Unit})
	require.Nil(t, b.Meters[3].Isolated)
	require.Equal(t, "gate meter", b.Meters[0].Name)
	require.True(t, *b.Meters[0].Isolated)
	require.Equal(t, "2400 8N1", b.Lines[0].Settings)
	require.Equal(t, []any{1, "V", 3, "mA"}, []any{b.Lines[1].Column, b.Lines[1].Unit, b.Lines[2].Column, b.Lines[2].Unit})
	require.Contains(t, strings.Join(b.Cautions(), "\n"), "across the load resistor")
}

func TestAnswersAreChecked(t *testing.T) {
	found := []Found{{Path: "/dev/serial/by-id/x"}}
	a := Answers{}
	wrong := map[string]string{
		"line 1: speaks": "morse", "line 1: settings": "fast", "line 1: columns": "0", "line 1: role 1": "grid", "line 1: unit 1": "mA", "line 1: isolated": "maybe",
		"line 2": "192.0.2.7:5025", "kind": "drain", "rl": "10 V", "rl_rating": "0", "vdd": "twelve", "vgs": "-1", "bleed": "0",
	}
	right := map[string]string{"line 1: speaks": "text", "line 1: settings": "9600 8N1", "line 1: role 1": "gate", "line 1: isolated": "unsure", "kind": "load", "rl": "1k", "vdd": "9 V"}
	for q, more := Next(found, a); more; q, more = Next(found, a) {
		if w, ok := wrong[q.Key]; ok {
			_, err := q.Check(w)
			require.Error(t, err, q.Key)
			delete(wrong, q.Key)
		}
		got, err := q.Check(right[q.Key])
		require.NoError(t, err, q.Key)
		a[q.Key] = got
	}
	require.Empty(t, wrong, "never asked")
}

// TestWrittenParses: whatever is answered and taken makes a file that is read
// back with the same circuit and meters.
func TestWrittenParses(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		found := make([]Found, rapid.IntRange(0, 4).Draw(t, "lines"))
		for i := range found {
			kind := rapid.SampledFrom([]string{"/dev/serial/by-id/", "tcp:", "/dev/usbtmc"}).Draw(t, "kind")
			found[i] = Found{Path: fmt.Sprintf("%s%d%s", kind, i, rapid.SampledFrom([]string{"", `"`, "\\", "µ", "\x01"}).Draw(t, "odd"))}
		}
		roles := map[string]string{}
		a := answerAll(t, found, func(q Question) string {
			switch {
			case len(q.Choices) > 0:
				return rapid.SampledFrom(q.Choices).Draw(t, q.Key)
			case strings.Count(q.Key, " ") == 1 && strings.HasPrefix(q.Key, "line"):
				return rapid.SampledFrom([]string{None, "tcp:h", "/dev/y", "COM3", Keyboard}).Filter(func(s string) bool { _, err := q.Check(s); return err == nil }).Draw(t, q.Key)
			case strings.Contains(q.Key, "name"):
				return rapid.StringMatching(`[ -~µ\t"\\]*x`).Draw(t, q.Key)
			case strings.Contains(q.Key, "columns"):
				return fmt.Sprint(rapid.IntRange(1, 4).Draw(t, q.Key))
			case strings.Contains(q.Key, "settings"):
				return "9600 7E1"
			case q.Default != "":
				return ""
			}
			return rapid.SampledFrom([]string{"12", "2.2", "4k7", "3m"}).Draw(t, q.Key)
		})
		for k, v := range a {
			if strings.Contains(k, "role") && v != None {
				roles[v] = k
			}
		}
		text := Write(found, a)
		b, err := Parse([]byte(text))
		if err != nil {
			t.Fatalf("%v\n%s", err, text)
		}
		if len(b.Meters) != len(roles) || string(b.Given.Circuit) != a["kind"] || b.Name != a["name"] {
			t.Fatalf("%d meters, %d roles, %s, %q\n%s", len(b.Meters), len(roles), b.Given.Circuit, b.Name, text)
		}
		if err := b.Live(); (err != nil) != (len(roles) == 0) {
			t.Fatalf("%v\n%s", err, text)
		}
	})
}
