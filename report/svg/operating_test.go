package svg

import (
	"bytes"
	"math"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"gatesill/fit/plan"
)

func TestOperating(t *testing.T) {
	none := math.NaN()
	a, err := plan.ToAccept(plan.AcceptRequest{Good: 0.01, GoodRisk: 0.05, Bad: 0.05, Risk: 0.1, KnownSigma: none, K: none, Low: none, High: none})
	if err != nil {
		t.Fatal(err)
	}
	var b bytes.Buffer
	if err := Operating(&b, a, Frame{Standalone: true}); err != nil {
		t.Fatal(err)
	}
	points := 0
	for _, e := range read(t, b.Bytes()) {
		if e.name == "circle" {
			points++
		}
	}
	if points != 2 || !strings.Contains(b.String(), "1 % bad: accepted 95 %") || !strings.Contains(b.String(), "<style>") {
		t.Errorf("%d agreed points:\n%s", points, b.String())
	}
}

// Whatever stands in the answer, the picture is well-formed with finite numbers.
func TestOperatingHoldsAnything(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		f := rapid.OneOf(rapid.Float64(), rapid.Just(math.NaN()), rapid.Just(math.Inf(1)), rapid.Float64Range(0, 1))
		a := &plan.Accept{}
		a.Good, a.Bad, a.AtGood, a.AtBad = f.Draw(t, "good"), f.Draw(t, "bad"), f.Draw(t, "at good"), f.Draw(t, "at bad")
		a.Often, a.Seldom, a.Plan.K = f.Draw(t, "often"), f.Draw(t, "seldom"), f.Draw(t, "k")
		for range rapid.IntRange(0, 5).Draw(t, "points") {
			a.Curve = append(a.Curve, plan.OCPoint{Bad: f.Draw(t, "x"), Accepts: f.Draw(t, "y")})
		}
		read(t, appendOperating(nil, a, Frame{}))
	})
}
