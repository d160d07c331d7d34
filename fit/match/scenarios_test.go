package match

import (
	"context"
	"math"
	"os"
	"slices"
	"strconv"
	"strings"
	"testing"

	"gatesill/fit"
)

// rowsOf reads a file of testdata/scenarios without its header; comma: what stands
// between columns.
func rowsOf(t testing.TB, name, comma string) [][]string {
	t.Helper()
	b, err := os.ReadFile("../../testdata/scenarios/" + name)
	if err != nil {
		t.Fatal(err)
	}
	var rows [][]string
	for _, line := range strings.Split(strings.TrimSpace(string(b)), "\n")[1:] {
		rows = append(rows, strings.Split(strings.TrimSpace(line), comma))
	}
	return rows
}

func number(t testing.TB, s string) float64 {
	t.Helper()
	x, err := strconv.ParseFloat(strings.ReplaceAll(s, ",", "."), 64)
	if err != nil {
		t.Fatal(err)
	}
	return x
}

// member is a device with a gate voltage at the idle current and, if not 0, a
// transconductance.
func member(name string, v, gm, step float64) Member {
	r := fit.NewResult()
	r.State = fit.Measured
	r.VgsIdle.Value = v
	if gm != 0 {
		r.GmIdle.Value = gm
	}
	return Member{Name: name, Lot: "L", Step: step, Result: r}
}

func tenParts(t testing.TB) []Member {
	var ms []Member
	for _, r := range rowsOf(t, "s1_ten_parts.csv", ",") {
		ms = append(ms, member(r[0], number(t, r[1]), 0, 0.01))
	}
	return ms
}

func pushPull(t testing.TB) []Member {
	var ms []Member
	for _, r := range rowsOf(t, "s2_push_pull_20.csv", ",") {
		ms = append(ms, member(r[0], number(t, r[1]), number(t, r[2]), 0.001))
	}
	return ms
}

func hundredOutputs(t testing.TB) []Member {
	var ms []Member
	for _, r := range rowsOf(t, "s3_audio_100.csv", ";") {
		ms = append(ms, member(r[0], number(t, r[1]), 1.2, 0.001))
	}
	return ms
}

func mustMatch(t testing.TB, ms []Member, opt Options) *Matching {
	t.Helper()
	m, err := Match(context.Background(), ms, opt)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

func idle(within float64) []Criterion {
	return []Criterion{{Key: fit.KeyVgsIdle, Within: within}}
}

// namesOf gives the names of a set, ascending.
func namesOf(s *Set) string {
	var n []string
	for _, d := range s.Devices {
		n = append(n, d.Name)
	}
	slices.Sort(n)
	return strings.Join(n, ",")
}

func near(t testing.TB, what string, have, want, tol float64) {
	t.Helper()
	if !(math.Abs(have-want) <= tol) {
		t.Errorf("%s: have %.9g, want %.9g within %g, off by %g", what, have, want, tol, have-want)
	}
}

// TestTenParts holds the published list of ten against what was found on it by
// full enumeration outside this program.
func TestTenParts(t *testing.T) {
	ms := tenParts(t)
	if m := mustMatch(t, ms, Options{By: idle(0.010)}); len(m.Sets) != 2 {
		t.Errorf("pairs at 10 mV: have %d, want 2", len(m.Sets))
	}
	m := mustMatch(t, ms, Options{By: idle(0.030)})
	if len(m.Sets) != 4 || m.Bound.Kind != Optimal {
		t.Errorf("pairs at 30 mV: have %d, %s, want 4, optimal", len(m.Sets), m.Bound.Kind)
	}
	near(t, "total at 30 mV", m.Total, 0.070, 1e-9)
	q := mustMatch(t, ms, Options{Size: 4, By: idle(0.020)})
	if len(q.Sets) != 1 || namesOf(&q.Sets[0]) != "3,5,8,9" {
		t.Errorf("quads at 20 mV: have %+v, want one of 3,5,8,9", q.Sets)
	} else {
		near(t, "spread of the quad", q.Sets[0].Spread, 0.010, 1e-9)
	}
	if w := mustMatch(t, ms, Options{By: idle(0.005)}); !slices.ContainsFunc(w.Warnings, func(w fit.Warning) bool { return w.Code == fit.CodeBenchLimited }) {
		t.Errorf("a tolerance of half a display step: no warning, have %v", w.Warnings)
	} else if len(w.Sets) != 2 { // 2.82 three times, so one pair; 2.78, ... see the file
		t.Logf("pairs of equal readings: %d", len(w.Sets))
	}
}

func TestPushPull(t *testing.T) {
	ms := pushPull(t)
	for _, c := range []struct {
		within float64
		sets   int
	}{{0.010, 6}, {0.030, 8}, {0.100, 9}} {
		m := mustMatch(t, ms, Options{By: idle(c.within), At: 0.25})
		if len(m.Sets) != c.sets {
			t.Errorf("pairs within %g V: have %d, want %d", c.within, len(m.Sets), c.sets)
		}
		if c.within == 0.030 {
			near(t, "total at 30 mV", m.Total, 0.070, 1e-9)
			i := slices.IndexFunc(m.TradeOff, func(r TradeOff) bool { return r.Within == 0.01 })
			if i < 0 || m.TradeOff[i].Sets != 6 || !m.TradeOff[i].Exact {
				t.Errorf("trade-off at 10 mV: have %+v, want 6 sets, exact", m.TradeOff)
			}
		}
	}
	two := []Criterion{{Key: fit.KeyVgsIdle, Within: 0.030}, {Key: fit.KeyGmIdle, Within: 0.05}}
	m := mustMatch(t, ms, Options{By: two, At: 0.25})
	if len(m.Sets) != 8 || m.Bound.Kind != Optimal {
		t.Errorf("pairs within 30 mV and 5 %%: have %d, %s, want 8, optimal", len(m.Sets), m.Bound.Kind)
	}
	near(t, "total at 30 mV and 5 %", m.Total, 0.091, 1e-9)
	for _, s := range m.Sets {
		if !s.Within || s.Spreads[1] > 0.05+1e-6 {
			t.Errorf("set %s: spreads %v, within %v", namesOf(&s), s.Spreads, s.Within)
		}
	}
	// 30 mV at the lot's 1.38 S are 41.4 mA of 250 mA.
	a, b := member("a", 3.30, 1.38, 0), member("b", 3.33, 1.38, 0)
	s := Share([]Member{a, b}, Options{At: 0.25})
	near(t, "imbalance of 30 mV, A", s.Imbalance, 0.0414, 0.0001)
	near(t, "share", s.Share, 0.17, 0.005)
}

func TestHundredOutputs(t *testing.T) {
	ms := hundredOutputs(t)
	for _, c := range []struct {
		within float64
		sets   int
		mean   float64
	}{{0.005, 14, 0.0026}, {0.010, 20, 0.0043}, {0.020, 22, 0.0061}, {0.050, 24, 0.0075}} {
		m := mustMatch(t, ms, Options{Size: 4, By: idle(c.within), At: 0.15, SourceResistor: 0.22})
		if len(m.Sets) != c.sets {
			t.Errorf("quads within %g V: have %d, want %d", c.within, len(m.Sets), c.sets)
		}
		near(t, "mean spread", m.Total/float64(len(m.Sets)), c.mean, 0.00006)
		for _, s := range m.Sets {
			if c.within == 0.010 && s.Sharing.Imbalance > 0.0095+0.0003 {
				t.Errorf("a 10 mV set with 0.22 ohm: imbalance %g A, want at most 9.5 mA", s.Sharing.Imbalance)
			}
		}
		if len(m.LeftOver) != 100-4*c.sets {
			t.Errorf("left over: have %d, want %d", len(m.LeftOver), 100-4*c.sets)
		}
	}
	// dV/(R_S + 1/g_m) for small differences, 10 mV: 9.5 mA.
	a, b := member("a", 4.20, 1.2, 0), member("b", 4.21, 1.2, 0)
	near(t, "10 mV with 0.22 ohm, A", Share([]Member{a, b}, Options{At: 0.15, SourceResistor: 0.22}).Imbalance, 0.0095, 0.00005)
}
