package job

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/report"
	"gatesill/store/record"
)

// sheetOf makes a sheet of sweeps in their order: "A+" is device A swept up, "A-" down,
// "A" a spot; "/" begins another session.
func sheetOf(sweeps string) *report.Sheet {
	s := &report.Sheet{Sessions: []record.Session{{ID: "s1", Name: "first"}, {ID: "s2", Name: "second"}}}
	at := map[string]int{}
	session := 0
	for k, w := range strings.Fields(sweeps) {
		if w == "/" {
			session++
			continue
		}
		name := strings.TrimRight(w, "+-")
		dir := record.Spot
		switch {
		case strings.HasSuffix(w, "+"):
			dir = record.Up
		case strings.HasSuffix(w, "-"):
			dir = record.Down
		}
		i, ok := at[name]
		if !ok {
			i = len(s.Devices)
			at[name] = i
			s.Devices = append(s.Devices, report.Device{Device: record.Device{ID: name, Name: name, Role: record.Sample}})
		}
		s.Devices[i].Sweeps = append(s.Devices[i].Sweeps, report.Sweep{Sweep: record.Sweep{
			ID: fmt.Sprintf("%03d", k), SessionID: s.Sessions[session].ID, Direction: dir, Position: k + 1,
		}})
	}
	return s
}

// insertionWords writes sittings as "A+- B+ / A+": one word an insertion.
func insertionWords(runs []sittingRun) string {
	var words []string
	for i, r := range runs {
		if i > 0 {
			words = append(words, "/")
		}
		for _, in := range r.insertions {
			w := in.device.Name
			for _, sw := range in.sweeps {
				w += map[record.Direction]string{record.Up: "+", record.Down: "-"}[sw.Direction]
			}
			words = append(words, w)
		}
	}
	return strings.Join(words, " ")
}

func TestInsertions(t *testing.T) {
	for sweeps, want := range map[string]string{
		"A+ A- B+ B-":            "A+- B+-",            // up and down are one
		"A+ B+ A- B-":            "A+ B+ A- B-",        // another device between them
		"A+ A- A+ A- B+ B-":      "A+- A+- B+-",        // a second pair is a second insertion
		"A+ A+ B+":               "A+ A+ B+",           // the same direction again
		"A A B A":                "A A B A",            // every spot
		"A+ B+ / A- B-":          "A+ B+ / A- B-",      // a session parts what would be a pair
		"A+ A- B+ / B+ A+ A- B-": "A+- B+ / B+ A+- B-", // and its order counts
	} {
		require.Equal(t, want, insertionWords(sittingsOf(sheetOf(sweeps))), sweeps)
	}
	// Times go before the order in which sweeps were added; one that has none, and they do not.
	s := sheetOf("A+ B+ A-")
	s.Devices[0].Sweeps[0].MeasuredAt = "2026-01-02T10:00:00.000Z"
	s.Devices[0].Sweeps[1].MeasuredAt = "2026-01-02T10:01:00.000Z"
	require.Equal(t, "A+ B+ A-", insertionWords(sittingsOf(s)))
	s.Devices[1].Sweeps[0].MeasuredAt = "2026-01-02T10:05:00.000Z"
	require.Equal(t, "A+- B+", insertionWords(sittingsOf(s)))
	// Sweeps that do not count are none.
	s.Devices[0].Sweeps[0].Excluded = true
	require.Equal(t, "A- B+", insertionWords(sittingsOf(s)))
	// Another circuit is another sitting, and so is one that is much warmer.
	s = sheetOf("A B A B")
	s.Devices[0].Sweeps[1].Condition.Circuit = record.Diode
	require.Equal(t, "A B B / A", insertionWords(sittingsOf(s)))
	kept, left := mostly(sittingsOf(s))
	require.Equal(t, "A B B", insertionWords(kept))
	require.Equal(t, 1, left)
	s = sheetOf("A B A B")
	for i, temp := range []float64{22, 23, 70, 70} {
		s.Devices[i%2].Sweeps[i/2].Condition.Temp = record.Known(temp)
	}
	require.Equal(t, "A B / A B", insertionWords(sittingsOf(s)))
	require.Equal(t, []string{"first, circuit not given, 22 °C", "first, circuit not given, 70 °C"}, []string{sittingsOf(s)[0].name, sittingsOf(s)[1].name})
}

// A study makes the bench known for other lots of the part on it, and for no others.
func TestRepeatabilityElsewhere(t *testing.T) {
	ctx, dir := context.Background(), t.TempDir()
	var out bytes.Buffer
	env := &Env{Store: filepath.Join(dir, "s.db"), Out: &out, Err: io.Discard, Quiet: true, Version: "test"}
	bench := func(name string) string {
		file := filepath.Join(dir, name+".toml")
		require.NoError(t, os.WriteFile(file, []byte("name = \""+name+"\"\n[[meter]]\nrole = \"gate\"\nname = \"M\"\n"), 0o644))
		return file
	}
	rng := rand.New(rand.NewPCG(20261201, 1))
	add := func(lot, part, benchFile string, rounds int) {
		var rows strings.Builder
		rows.WriteString("device,vgs_at_10mA_V\n")
		base := make([]float64, 8)
		for i := range base {
			base[i] = 3 + 0.05*rng.NormFloat64()
		}
		for range rounds {
			for _, i := range rng.Perm(len(base)) {
				fmt.Fprintf(&rows, "D%d,%.4f\n", i, base[i]+2e-3*rng.NormFloat64())
			}
		}
		file := filepath.Join(dir, lot+".csv")
		require.NoError(t, os.WriteFile(file, []byte(rows.String()), 0o644))
		require.NoError(t, LotAdd(ctx, env, lot, LotEdit{Part: &part}))
		require.NoError(t, Import(ctx, env, ImportRequest{Lot: lot, Files: []string{file}, Bench: benchFile}))
	}
	attic, cellar := bench("attic"), bench("cellar")
	add("study", "X1", attic, 3)
	add("same", "X1", attic, 1)
	add("otherbench", "X1", cellar, 1)
	add("otherpart", "X2", attic, 1)
	add("nobench", "X1", "", 1)
	u := func(lot string) (least float64, repeatability int) {
		s, err := env.Sheet(ctx, lot, SheetOptions{Method: "auto"})
		require.NoError(t, err)
		least = 1
		for _, d := range s.Devices {
			least = min(least, d.Result.Vgsth.U)
		}
		return least, len(s.Repeatability)
	}
	own, n := u("study")
	require.Equal(t, 1, n)
	elsewhere, n := u("same")
	require.Equal(t, 1, n)
	require.InDelta(t, 2e-3, elsewhere, 0.8e-3) // 16 degrees of freedom
	require.InDelta(t, elsewhere/1.7320508, own, 1e-9, "the study's devices were put in three times")
	for _, lot := range []string{"otherbench", "otherpart", "nobench"} {
		least, n := u(lot)
		require.Zero(t, n, lot)
		require.Less(t, least, 1e-4, lot)
	}
	s, err := env.Sheet(ctx, "same", SheetOptions{Method: "auto"})
	require.NoError(t, err)
	require.Equal(t, "8 devices x 3 of lot study", s.Repeatability["vgsth_V"].Basis)

	// The same order every time it is asked for, another for another lot.
	env.JSON = true
	order := func(lot string) (rounds [][]string) {
		out.Reset()
		require.NoError(t, Gauge(ctx, env, lot, SheetOptions{}, GaugeRequest{Rounds: 3, Parts: 5}))
		var doc struct {
			Rounds [][]string `json:"rounds"`
		}
		require.NoError(t, json.Unmarshal(out.Bytes(), &doc))
		return doc.Rounds
	}
	require.Equal(t, order("study"), order("study"))
	require.NotEqual(t, order("study"), order("same"))
	rounds := order("study")
	require.Len(t, rounds, 3)
	for _, r := range rounds {
		require.ElementsMatch(t, rounds[0], r)
		require.Len(t, r, 5)
	}
	require.NotEqual(t, rounds[0], rounds[1])
}
