package lot

import (
	"math"
	"strings"
	"testing"

	"gatesill/fit"
	"gatesill/fit/stats"
)

// Ten published readings. The numbers were worked out by hand and by a second
// program.
func TestTenFromABag(t *testing.T) {
	devs := scenario(t, "s1_ten_parts.csv", fit.KeyVgsth)
	s := SpreadOf(devs, SpreadOptions{SortedBy: fit.KeyVgsth})
	sum := s.Summary[fit.KeyVgsth]
	near(t, "mean", sum.Mean, 2.787, 5e-5)
	near(t, "SD", sum.SD, 0.1327, 5e-5)
	near(t, "median", sum.Median, 2.820, 1e-9)
	near(t, "robust SD", sum.RobustSD, 0.0371, 5e-5)
	near(t, "range", sum.Max-sum.Min, 0.470, 1e-9)
	near(t, "step", sum.Step, 0.010, 1e-12)
	for name, want := range map[int]float64{4: -9.4, 1: -4.0, 2: 3.2} {
		near(t, "distance of part "+s.Devices[name].Name, s.Devices[name].Distance[fit.KeyVgsth], want, 0.05)
	}
	for i, v := range s.Devices {
		if d := v.Distance[fit.KeyVgsth]; i != 4 && i != 1 && i != 2 && math.Abs(d) > 2.45 {
			t.Errorf("part %s: distance %v, want within 2.4", v.Name, d)
		}
		// The plain rule sees nothing, which is what the robust one is for.
		if z := (devs[i].Result.Vgsth.Value - sum.Mean) / sum.SD; math.Abs(z) > 3 {
			t.Errorf("part %s: %v ordinary standard deviations off", v.Name, z)
		}
	}
	if !strings.Contains(s.Estimator, "1.4826 × MAD") || !strings.Contains(s.Estimator, "none can lie more than 2.85") {
		t.Errorf("estimator: %q", s.Estimator)
	}
	for k, want := range map[float64]string{
		0:   "4(off-family-threshold)",
		6:   "4(off-family-threshold)",
		3.5: "1(off-family-threshold) 4(off-family-threshold)",
		9.3: "4(off-family-threshold)",
		9.5: "",
	} {
		got := SpreadOf(devs, SpreadOptions{SortedBy: fit.KeyVgsth, K: k})
		if flagged(got) != want || got.Populations != 1 {
			t.Errorf("limit %v flags %q of %d populations, want %q of 1", k, flagged(got), got.Populations, want)
		}
	}
	got := SpreadOf(devs, SpreadOptions{K: 6}).Devices[4].Reasons[0].Text
	if want := "V_GS(th) is 2.470 V, 350 mV below the lot's median of 2.820 V: 9.44 robust spreads of 37 mV, beyond the limit of 6.00"; got != want {
		t.Errorf("sentence:\n%s\nwant\n%s", got, want)
	}
	// p-channel parts are the same parts turned round.
	for i := range devs {
		devs[i].Result.Vgsth.Value *= -1
	}
	turned := SpreadOf(devs, SpreadOptions{PChannel: true})
	if flagged(turned) != "4(off-family-threshold)" {
		t.Errorf("p-channel: %q", flagged(turned))
	}
	near(t, "p-channel median", turned.Summary[fit.KeyVgsth].Median, -2.820, 1e-9)
	near(t, "p-channel least", turned.Summary[fit.KeyVgsth].Min, -2.94, 1e-9)
}

// An invented lot of twenty with bias and transconductance.
func TestPushPullLot(t *testing.T) {
	s := SpreadOf(scenario(t, "s2_push_pull_20.csv", fit.KeyVgsIdle, fit.KeyGmIdle), SpreadOptions{})
	sum := s.Summary[fit.KeyVgsIdle]
	near(t, "mean", sum.Mean, 3.356, 5e-4)
	near(t, "SD", sum.SD, 0.1198, 5e-5)
	near(t, "least", sum.Min, 3.042, 0)
	near(t, "greatest", sum.Max, 3.606, 0)
	if s.SortedBy != fit.KeyVgsIdle || s.Populations != 1 || flagged(s) != "" {
		t.Errorf("sorted by %s, %d populations, flagged %q", s.SortedBy, s.Populations, flagged(s))
	}
	if len(s.Limits) != 2 || s.Limits[fit.KeyGmIdle].K != DefaultLimit(20, 2) {
		t.Errorf("limits: %+v", s.Limits)
	}
}

// An invented lot of a hundred.
func TestAudioLot(t *testing.T) {
	s := SpreadOf(scenario(t, "s3_audio_100.csv", fit.KeyVgsIdle), SpreadOptions{})
	sum := s.Summary[fit.KeyVgsIdle]
	near(t, "mean", sum.Mean, 4.196, 5e-4)
	near(t, "SD", sum.SD, 0.0642, 5e-5)
	near(t, "range", sum.Max-sum.Min, 0.369, 1e-9)
	if sum.N != 100 || s.Populations != 1 || flagged(s) != "" {
		t.Errorf("n %d, %d populations, flagged %q", sum.N, s.Populations, flagged(s))
	}
}

// An invented lot of 25 that was mixed from two.
func TestMixedBag(t *testing.T) {
	devs := scenario(t, "s9_mixed.csv", fit.KeyVgsth, fit.KeyGmIdle)
	for _, k := range []float64{0, 3, 6, 20} {
		s := SpreadOf(devs, SpreadOptions{SortedBy: fit.KeyVgsth, K: k, VgsthMin: 2, VgsthMax: 4})
		sum := s.Summary[fit.KeyVgsth]
		near(t, "mean", sum.Mean, 2.873, 5e-4)
		near(t, "SD", sum.SD, 0.347, 5e-4)
		near(t, "median", sum.Median, 3.070, 1e-9)
		near(t, "robust SD", sum.RobustSD, 0.090, 5e-4)
		if s.Populations != 2 || s.Split == nil {
			t.Fatalf("limit %v: %d populations", k, s.Populations)
		}
		near(t, "gap from", s.Split.GapLow, 2.524, 0)
		near(t, "gap to", s.Split.GapHigh, 3.009, 0)
		if len(s.Split.Low) != 8 || len(s.Split.High) != 17 || s.Split.By != fit.KeyVgsth || s.Split.SecondAlso != fit.KeyGmIdle {
			t.Errorf("split by %s and %q in %d and %d", s.Split.By, s.Split.SecondAlso, len(s.Split.Low), len(s.Split.High))
		}
		if flagged(s) != "" || len(s.Limits) != 0 {
			t.Errorf("limit %v flags %q within %v, want none: 8 of 25 are no minority", k, flagged(s), s.Limits)
		}
		want := "two populations by V_GS(th): 8 devices at 2.253 V to 2.524 V and 17 devices at 3.009 V to 3.214 V with a gap of 485 mV between them, " +
			"and transconductance at the idle current parts them in the same way (evidence 53.4, where 21.2 is needed: fewer than 1 % of lots of one population have as much); this is not evidence of origin: stop, ask the source, measure all devices"
		if s.Split.Text != want {
			t.Errorf("split says\n%s\nwant\n%s", s.Split.Text, want)
		}
	}
	s := SpreadOf(devs, SpreadOptions{K: 6})
	if text := warnings(s, fit.CodeTwoPopulations); !strings.HasSuffix(text, "a limit of 6.00 robust spreads over the mixed lot would flag 8") {
		t.Errorf("warnings: %s", text)
	}
}

// The robust estimators can disagree wholly on such a lot: by the median absolute
// deviation a limit of 6 flags 8, by the interquartile range (/1.35) none.
func TestEstimatorsDisagree(t *testing.T) {
	c := columnOf(scenario(t, "s9_mixed.csv", fit.KeyVgsth), fit.KeyVgsth, false, 0)
	for _, e := range []struct {
		sd   float64
		want int
	}{
		{center(c).sd, 8},
		{stats.IQR(c.sorted, stats.Type6) / 1.35, 0},
		{stats.IQR(c.sorted, stats.Type7) / 1.35, 0},
	} {
		b := band{mid: stats.MedianSorted(c.sorted), sd: e.sd, k: 6}
		b.widen(c, b.sd)
		n := 0
		for i := range c.x {
			if b.outside(c, i) {
				n++
			}
		}
		if n != e.want {
			t.Errorf("spread %v flags %d, want %d", e.sd, n, e.want)
		}
	}
}

// Four of the lower group among the seventeen upper ones are a minority: those
// are flagged, and nothing else.
func TestSmallSecondPopulation(t *testing.T) {
	var devs []Device
	low := 0
	for _, d := range scenario(t, "s9_mixed.csv", fit.KeyVgsth, fit.KeyGmIdle) {
		if d.Result.Vgsth.Value < 2.7 {
			if low++; low > 4 {
				continue
			}
		}
		devs = append(devs, d)
	}
	s := SpreadOf(devs, SpreadOptions{})
	if s.Populations != 2 || len(s.Split.Low) != 4 {
		t.Fatalf("%d populations", s.Populations)
	}
	for i, v := range s.Devices {
		odd := devs[i].Result.Vgsth.Value < 2.7
		if v.Flagged != odd || odd && v.Reasons[0].Code != fit.CodeTwoPopulations {
			t.Errorf("%s at %v: %+v", v.Name, devs[i].Result.Vgsth.Value, v.Reasons)
		}
	}
	t.Log(s.Devices[5].Reasons)
}
