package compare

import (
	"encoding/csv"
	"math"
	"math/rand/v2"
	"os"
	"strconv"
	"strings"
	"testing"

	"gatesill/fit/stats"
)

// remeasured reads testdata/scenarios/s6_remeasure.csv: twelve parts at 21.0 °C and,
// half a year later, at 25.2 °C.
func remeasured(t *testing.T) (a, b Lot) {
	t.Helper()
	f, err := os.Open("../../testdata/scenarios/s6_remeasure.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	column := func(name string) int {
		for i, h := range rows[0] {
			if strings.Contains(h, name) {
				return i
			}
		}
		t.Fatalf("no column %q in %v", name, rows[0])
		return 0
	}
	serial, temp, value := column("serial"), column("ambient"), column("_V")
	lots := map[string]*Lot{}
	for _, r := range rows[1:] {
		v, err := strconv.ParseFloat(r[value], 64)
		if err != nil {
			t.Fatal(err)
		}
		l := lots[r[temp]]
		if l == nil {
			c, _ := strconv.ParseFloat(r[temp], 64)
			l = &Lot{Name: "at " + r[temp], Temp: c, Idle: nan, Populations: 1}
			lots[r[temp]] = l
		}
		l.Members = append(l.Members, member(r[serial], v, 1e-4, 1e-3, 1e-2, Sitting{r[temp], "m"}))
	}
	return *lots["21.0"], *lots["25.2"]
}

// The same parts again: paired by themselves, the temperature taken off, and one part
// that moved by 45 mV does not move the shift. The scenario gives -17.0 mV raw and
// -0.2 mV after -4.0 mV/K.
func TestTheSamePartsLater(t *testing.T) {
	a, b := remeasured(t)
	opt := plain()
	opt.Pairing, opt.Tempco = ByLikeness, -0.004
	c := compareLots(t, a, b, opt)
	t.Log(c.Sentence)
	t.Log(c.Paired.Why)
	if c.Paired == nil || c.Paired.Pairs != 12 || c.Verdict != NoDifference {
		t.Fatalf("%+v %s", c.Paired, c.Verdict)
	}
	near(t, "raw", c.Raw, -0.0170, 0.0005)
	near(t, "shift", c.Shift, -0.0002, 0.0005)
	near(t, "its own", c.Paired.Own.Value, c.Raw, 1e-12)
	if !(c.Paired.Own.High-c.Paired.Own.Low < (c.High-c.Low)/2) {
		t.Errorf("pairs alone %+v, with the bench %v to %v", c.Paired.Own, c.Low, c.High)
	}
	if !strings.Contains(c.Sentence, "the 12 pairs alone") {
		t.Error(c.Sentence)
	}
	opt.Pairing = Never
	if c = compareLots(t, a, b, opt); c.Paired != nil || strings.Contains(c.Test, "serial") {
		t.Error("paired although not asked for")
	}
}

// Lots numbered from 1 each are not paired unless that is asked for.
func TestPairing(t *testing.T) {
	d := &drawer{rand.New(rand.NewPCG(7, 1)), 0}
	a, b := d.lot("L", 20, 3, 0.05), d.lot("L", 20, 3, 0.05)
	b.Name = "M"
	b.Members = b.Members[2:]
	opt := plain()
	opt.Pairing = ByLikeness
	if c := compareLots(t, *a, *b, opt); c.Paired != nil {
		t.Errorf("%+v", c.Paired)
	}
	opt.Pairing = BySerial
	c := compareLots(t, *a, *b, opt)
	if c.Paired == nil || c.Paired.Pairs != 18 || len(c.Paired.OnlyRef) != 2 || c.Paired.OnlyNew != nil {
		t.Errorf("%+v", c.Paired)
	}
	// Too few of one serial.
	for i := range b.Members[2:] {
		b.Members[i+2].Name = "N" + b.Members[i+2].Name
	}
	if c = compareLots(t, *a, *b, opt); c.Verdict != TooFew || c.Paired.Pairs != 2 {
		t.Errorf("%s", c.Sentence)
	}
	// A device that never reaches the current in one of the lots is above.
	a, b = d.lot("L", 10, 3, 0.05), nil
	copied := Lot{Name: "M", Members: append([]Member(nil), a.Members...)}
	copied.Members[3] = member(a.Members[3].Name, math.Inf(1), 0, 0, 0, bench)
	for i := range copied.Members {
		copied.Members[i].Result.VgsIdle.Value += 0.001 * float64(i%3)
	}
	opt.Pairing = ByLikeness
	if c = compareLots(t, *a, copied, opt); c.Paired == nil || math.IsNaN(c.Shift) || c.Paired.Pairs != 10 {
		t.Errorf("%s %+v", c.Sentence, c.Paired)
	}
}

// The interval of the ratio by pairs covers it, and its ends are where the test of
// Pitman and Morgan has p = 1 - level.
func TestPairedRatio(t *testing.T) {
	d := draws(8, 1)
	n, covers := 1000, 0.0
	for range n {
		var x, y []float64
		for range 12 {
			v, e := d.value(0.05), d.value(0.01)
			x, y = append(x, 3+v+e), append(y, 3+1.3*v+d.value(0.013))
		}
		want := 1.3 // sd of y over that of x: 1.3 √(0.05² + 0.01²) over √(0.05² + 0.01²)
		r := pairedRatio(x, y, 0.95)
		if r.Low <= want && r.High >= want {
			covers++
		}
		for _, end := range []float64{r.Low, r.High} {
			scaled := make([]float64, len(y))
			for i := range y {
				scaled[i] = y[i] / end
			}
			near(t, "p at the end", pitmanMorganP(x, scaled), 0.05, 1e-6)
		}
	}
	covers /= float64(n)
	if covers < 0.93 || covers > 0.97 {
		t.Errorf("covers %.3f", covers)
	}
	if r := pairedRatio([]float64{1, 1, 1, 1}, []float64{1, 2, 3, 4}, 0.95); !math.IsNaN(r.Value) {
		t.Errorf("%+v", r)
	}
}

// p of a correlation: R 4.2, cor.test with r = 0.6 and n = 10 has t = 2.1213 with 8
// degrees of freedom (arithmetic), p = 0.0667.
func TestCorrelationP(t *testing.T) {
	near(t, "p", correlationP(0.6, 10), 2*stats.TUpper(2.12132, 8), 1e-6)
	near(t, "p", correlationP(0.6, 10), 0.0667, 1e-4)
	near(t, "r", correlation([]float64{1, 2, 3, 4}, []float64{2, 4, 6, 8}), 1, 1e-12)
}
