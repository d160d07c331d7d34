package job

import (
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"gatesill/acquire/rehearsal"
)

func TestParseFault(t *testing.T) {
	for text, want := range map[string]Fault{
		"silence:current@3":          {Fault: rehearsal.Fault{Kind: "silence", Role: "current"}, At: 3},
		"unplug:load@3+2.5":          {Fault: rehearsal.Fault{Kind: "unplug", Role: "load", For: 2.5}, At: 3},
		"swapped:gate,current@start": {Fault: rehearsal.Fault{Kind: "swapped", Role: "gate", With: "current"}, Start: true},
		"refused:supply-gate":        {Fault: rehearsal.Fault{Kind: "refused", Role: "supply-gate"}},
		"stuck:gate+1":               {Fault: rehearsal.Fault{Kind: "stuck", Role: "gate", For: 1}},
	} {
		f, err := ParseFault(text)
		require.NoError(t, err, text)
		require.Equal(t, want, f, text)
	}
	for _, text := range []string{"", "silence", "silence:", ":gate", "clear:gate", "silence:gate,load", "swapped:gate", "swapped:gate,gate", "swapped:gate,",
		"silence:gate@", "silence:gate@-1", "silence:gate@NaN", "silence:gate@1e9", "silence:gate+0", "silence:gate+", "silence:gate+1@2"} {
		_, err := ParseFault(text)
		var f *Failure
		require.ErrorAs(t, err, &f, text)
		require.Equal(t, ExitUsage, f.Code, text)
	}
}

func FuzzParseFault(f *testing.F) {
	f.Add("unplug:load@3+2")
	f.Add("swapped:gate,current@start")
	f.Fuzz(func(t *testing.T, text string) {
		p, err := ParseFault(text)
		if err == nil && (p.Role == "" || !(p.At >= 0) || !(p.For >= 0) || (p.With != "") != (p.Kind == rehearsal.Swapped)) {
			t.Errorf("%q: %+v", text, p)
		}
	})
}

func TestFaultsComeInTheirTime(t *testing.T) {
	p := faultPlan{left: []Fault{{At: 3}, {Start: true}, {At: 0}}}
	now := time.Now()
	require.Equal(t, []Fault{{Start: true}}, p.due(now))
	require.Empty(t, p.due(now.Add(time.Hour)), "no sweep has begun")
	p.begin(now)
	p.begin(now.Add(time.Hour)) // of a second sweep: the first counts
	require.Equal(t, []Fault{{At: 0}}, p.due(now))
	require.Empty(t, p.due(now.Add(2900*time.Millisecond)))
	require.Equal(t, []Fault{{At: 3}}, p.due(now.Add(3*time.Second)))
	require.Empty(t, p.left)
}
