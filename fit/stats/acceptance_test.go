package stats

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

func TestVariablesPlan(t *testing.T) {
	p := load(t, "acceptance_plan_design")
	d := map[string]float64{}
	for k, raw := range p.Data {
		d[k] = number(t, raw)
	}
	known := VariablesPlanFor(d["p1"], 1-d["pa1"], d["p2"], d["pa2"], true)
	unknown := VariablesPlanFor(d["p1"], 1-d["pa1"], d["p2"], d["pa2"], false)
	near(t, "n known", float64(known.N), number(t, p.Expected.of("n_known")), 0)
	near(t, "k known", known.K, number(t, p.Expected.of("k_known")), number(t, p.Tolerance["k_known"]))
	relative(t, "k known", known.K, number(t, p.Recomputed["k_known"]), 1e-9)
	near(t, "n unknown", float64(unknown.N), number(t, p.Expected.of("n_unknown")), 0)
	near(t, "k unknown", unknown.K, number(t, p.Expected.of("k_unknown_from_producer_point")), number(t, p.Tolerance["k_unknown_from_producer_point"]))
	ends := floats(t, p.Recomputed["k_unknown_interval"])
	relative(t, "least k", unknown.KLeast, ends[0], 1e-9)
	relative(t, "most k", unknown.KMost, ends[1], 1e-9)
	// The published k lies 3e-5 above the most, from its numerical search.
	printed := VariablesPlan{N: 49, K: number(t, p.Expected.of("k_unknown_from_producer_point"))}
	near(t, "accepts good, k as printed", printed.Accepts(d["p1"]), number(t, p.Recomputed["pa_at_p1"]), 1e-6)
	near(t, "accepts bad, k as printed", printed.Accepts(d["p2"]), number(t, p.Recomputed["pa_at_p2"]), 1e-5)
	for _, v := range []VariablesPlan{known, unknown} {
		near(t, "producer's point", v.Accepts(d["p1"]), d["pa1"], 1e-9)
		if got := v.Accepts(d["p2"]); got > d["pa2"] {
			t.Errorf("consumer's point: accepts %v, at most %v", got, d["pa2"])
		}
		relative(t, "bad accepted", v.BadAccepted(d["pa1"]), d["p1"], 1e-9)
		less := VariablesPlanWith(v.N-1, d["p1"], 1-d["pa1"], v.KnownSigma)
		if less.Accepts(d["p2"]) <= d["pa2"] {
			t.Errorf("%d parts would do", less.N)
		}
	}
	for _, bad := range []VariablesPlan{VariablesPlanFor(0.1, 0.05, 0.1, 0.1, false), VariablesPlanFor(0.01, 0, 0.1, 0.1, true), VariablesPlanFor(0.01, 0.5, 0.1, 0.5, true)} {
		if bad.N != 0 || !math.IsNaN(bad.Accepts(0.1)) {
			t.Errorf("no plan: %+v", bad)
		}
	}
}

func TestVariablesOC(t *testing.T) {
	p := load(t, "acceptance_oc_points")
	var points []struct {
		N        int
		K, P, PA float64
	}
	decode(t, p.Expected.of("points"), &points)
	for _, q := range points {
		got := VariablesPlan{N: q.N, K: q.K}.Accepts(q.P)
		near(t, "accepts", got, q.PA, number(t, p.Tolerance["abs"]))
		relative(t, "accepts", got, q.PA, 1e-9)
	}
	if len(points) != 30 {
		t.Errorf("%d points", len(points))
	}
}

func TestJudgement(t *testing.T) {
	p := load(t, "milstd414_k_method")
	y, limit := floats(t, p.Data["y"]), number(t, p.Data["upper_limit"])
	plan := VariablesPlan{N: len(y), K: number(t, p.Data["k"])}
	mean, sd := MeanSD(y)
	j := plan.Judge(mean, sd, len(y), math.NaN(), limit)
	accept := 0.0
	if j.Accept {
		accept = 1
	}
	for key, got := range map[string]float64{
		"mean": mean, "sd": sd, "Q": j.QHigh, "accept": accept, "p_hat_percent": 100 * j.BadHigh, "M_percent_from_k": 100 * j.MostBad,
	} {
		near(t, key, got, number(t, p.Expected.of(key)), number(t, p.Tolerance[key]))
		relative(t, key, got, number(t, p.Recomputed[key]), 1e-9)
	}
	var plans []struct {
		N   int
		AQL float64 `json:"aql_percent"`
		K   float64
		PA  float64 `json:"pa_at_aql"`
	}
	decode(t, p.Recomputed["plans"], &plans)
	for _, q := range plans {
		relative(t, "accepts at the table's quality", VariablesPlan{N: q.N, K: q.K}.Accepts(q.AQL/100), q.PA, 1e-9)
	}
	if len(plans) < 40 {
		t.Errorf("%d plans of the table", len(plans))
	}
	// A second limit far away changes nothing, one as near as the first does.
	if far := plan.Judge(mean, sd, len(y), 100, limit); !far.Accept || far.BadLow != 0 {
		t.Errorf("second limit far away: %+v", far)
	}
	if both := plan.Judge(mean, sd, len(y), 2*mean-limit, limit); both.Accept || both.BadLow != both.BadHigh {
		t.Errorf("both limits at 1.59 sd hold 4.4 %% together: %+v", both)
	}
	for what, j := range map[string]Judgement{
		"no limit": plan.Judge(mean, sd, 5, math.NaN(), math.Inf(1)), "no spread": plan.Judge(mean, 0, 5, 1, 2), "two values": plan.Judge(mean, sd, 2, 1, 2),
	} {
		if j.Computable || j.Accept {
			t.Errorf("%s: %+v", what, j)
		}
	}
}

// With one limit, the distance and the estimated share decide alike.
func TestJudgementAlike(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(3, 200).Draw(t, "n")
		v := VariablesPlan{N: n, K: rapid.Float64Range(-1, 4).Draw(t, "k"), KnownSigma: rapid.Bool().Draw(t, "known")}
		mean := rapid.Float64Range(-4, 4).Draw(t, "mean")
		j := v.Judge(mean, 1, n, math.NaN(), 0)
		if d := math.Abs(j.QHigh - v.K); d > 1e-6 && j.BadHigh != j.MostBad && j.Accept != (j.BadHigh <= j.MostBad) {
			t.Fatalf("%+v with %+v", j, v)
		}
		if m := v.Judge(-mean, 1, n, 0, math.NaN()); m.Accept != j.Accept || m.BadLow != j.BadHigh {
			t.Fatalf("mirrored: %+v, %+v", j, m)
		}
	})
}

// Sizes and chances of the zero-failure rule: 22, 29, 45, 59 and 299 are the
// lengths of all-good samples in common use; 41 % and 91 % by exact fractions
// (1 less 0.58717 and 0.08570 of TestHypergeometricAgainstManyDigits).
func TestZeroFailures(t *testing.T) {
	for _, c := range []struct {
		bad, confidence float64
		n               int
	}{{0.1, 0.9, 22}, {0.1, 0.95, 29}, {0.05, 0.9, 45}, {0.05, 0.95, 59}, {0.01, 0.95, 299}, {0.5, 0.5, 1}, {0.5, 0.75, 2}} {
		if n := ZeroFailureSize(c.bad, c.confidence); n != c.n {
			t.Errorf("%v bad at %v: %d parts, want %d", c.bad, c.confidence, n, c.n)
		}
		if n := c.n; BadBound(0, n, c.confidence) > c.bad*(1+1e-12) || n > 1 && BadBound(0, n-1, c.confidence) <= c.bad {
			t.Errorf("%d good parts: bound %v", n, BadBound(0, n, c.confidence))
		}
	}
	near(t, "5 of 200 with 20 bad", FindsBad(5, 20, 200), 0.41283398240555309, 1e-12)
	near(t, "22 of 200 with 20 bad", FindsBad(22, 20, 200), 0.91429827967902009, 1e-12)
	if n := ZeroFailureSizeOfLot(20, 200, 0.9); n != 21 || FindsBad(21, 20, 200) < 0.9 || FindsBad(20, 20, 200) >= 0.9 {
		t.Errorf("20 bad of 200 at 0.9: %d parts", n)
	}
	if n := ZeroFailureSizeOfLot(1, 10, 0.95); n != 10 {
		t.Errorf("one bad of 10: %d parts", n)
	}
	for _, n := range []int{ZeroFailureSize(0, 0.9), ZeroFailureSize(0.1, 1), ZeroFailureSizeOfLot(11, 10, 0.9), ZeroFailureSizeOfLot(0, 10, 0.9)} {
		if n != 0 {
			t.Errorf("%d parts for what cannot be", n)
		}
	}
}

// Binomial bounds by SciPy 1.10.1, beta.ppf(confidence, x+1, n-x); of lots by
// max(D for D in range(x, N-(n-x)+1) if hypergeom.cdf(x, N, D, n) > 1-confidence).
func TestBadBound(t *testing.T) {
	for _, c := range []struct {
		found, n         int
		confidence, want float64
	}{
		{1, 22, 0.9, 0.16558937371921467}, {2, 50, 0.95, 0.12061415542204412}, {0, 22, 0.9, 0.0993719797887215}, {10, 300, 0.99, 0.06601748728069291}, {3, 3, 0.9, 1},
	} {
		relative(t, "bound", BadBound(c.found, c.n, c.confidence), c.want, 1e-9)
	}
	for _, c := range []struct {
		found, n, size int
		confidence     float64
		want           int
	}{
		{0, 22, 200, 0.9, 18}, {1, 22, 200, 0.95, 38}, {0, 5, 200, 0.95, 89}, {2, 30, 60, 0.9, 8}, {0, 10, 10, 0.95, 0}, {0, 0, 10, 0.95, 10}, {3, 2, 10, 0.95, -1},
	} {
		if got := BadBoundOfLot(c.found, c.n, c.size, c.confidence); got != c.want {
			t.Errorf("%d bad among %d of %d: bound %d, want %d", c.found, c.n, c.size, got, c.want)
		}
	}
	// A bound of a large lot is that of a process.
	near(t, "bound of a large lot", float64(BadBoundOfLot(1, 22, 1e6, 0.9))/1e6, BadBound(1, 22, 0.9), 1e-4)
}

// Sizes by SciPy 1.10.1: for c = 0, 1, ... the least n with binom.cdf(c, n, bad)
// <= consumer, until binom.sf(c, n, good) <= producer.
func TestAttributesPlan(t *testing.T) {
	for _, c := range []struct {
		good, producer, bad, consumer float64
		n, c                          int
	}{{0.01, 0.05, 0.10, 0.10, 52, 2}, {0.05, 0.05, 0.15, 0.075, 80, 7}, {0.01, 0.1, 0.05, 0.1, 105, 2}} {
		n, allowed := AttributesPlanFor(c.good, c.producer, c.bad, c.consumer)
		if n != c.n || allowed != c.c {
			t.Errorf("%+v: n %d, c %d", c, n, allowed)
		}
	}
	near(t, "of a process", AttributesAccepts(22, 0, 0.1), 0.09847709021836111, 1e-12)
	near(t, "of a lot", AttributesAcceptsLot(22, 0, 20, 200), 0.08570172032097991, 1e-12)
}
