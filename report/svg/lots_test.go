package svg

import (
	"bytes"
	"fmt"
	"math"
	"math/rand/v2"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"gatesill/fit/compare"
)

var nan = math.NaN()

const nasty = "<script>alert(1)</script>\"'&\x1b[31m\u202e]]>"

// inventedSteps is a lot of n devices about a centre. Invented data.
func inventedSteps(name string, n int, centre float64, seed uint64) Steps {
	rng := rand.New(rand.NewPCG(seed, 3))
	s := Steps{Name: name, Centre: centre}
	for i := range n {
		s.Spots = append(s.Spots, Spot{Name: fmt.Sprintf("%s-%d", name, i+1), X: centre + 0.06*rng.NormFloat64(), Ref: i + 1})
	}
	return s
}

func none() DistributionOptions {
	return DistributionOptions{Frame: Frame{ID: "d", Title: "t"}, Quantity: "V_GS", Unit: "V", Margin: nan, Low: nan, High: nan}
}

var stepTokens = regexp.MustCompile(`[Mhv]|-?[0-9]+`)

// steps reads the line of a lot back into corners in fine units.
func stepCorners(t *testing.T, d string) (list [][2]int) {
	t.Helper()
	var nums []int
	x, y, cmd := 0, 0, ""
	flush := func() {
		for len(nums) > 0 {
			switch cmd {
			case "M":
				x, y, nums = nums[0], nums[1], nums[2:]
			case "h":
				x, nums = x+nums[0], nums[1:]
			case "v":
				y, nums = y+nums[0], nums[1:]
			default:
				t.Fatalf("no command in %q", d)
			}
			list = append(list, [2]int{x, y})
		}
	}
	for _, tok := range stepTokens.FindAllString(d, -1) {
		if n, err := strconv.Atoi(tok); err == nil {
			nums = append(nums, n)
			continue
		}
		flush()
		cmd = tok
	}
	flush()
	return list
}

// line finds the line of a side.
func line(t *testing.T, list []element, class string) element {
	t.Helper()
	for _, e := range list {
		if e.attr["class"] == class && strings.HasPrefix(e.title, "lot ") {
			return e
		}
	}
	t.Fatalf("no line of class %s", class)
	return element{}
}

// The line of a lot must stand, before and behind every value, at the share of
// its devices up to there, to within the width of the drawn line.
func TestStepsAreTheShares(t *testing.T) {
	for _, n := range []int{1, 2, 7, 90, 3000} {
		ref, cand := inventedSteps("A", n, 3.0, 1), inventedSteps("B", n/2+1, 3.1, 2)
		ref.Above = n / 5
		d := &distribution{canvas: &canvas{f: Frame{Width: 880, Height: 400}}, o: none(), lots: [2]Steps{ref, cand}}
		d.l, d.t, d.r, d.d = 66, 52, 864, 354
		d.sort(reference)
		d.sort(candidate)
		d.ranges()
		picture, drawn := AppendDistribution(nil, ref, cand, none())
		corners := stepCorners(t, line(t, read(t, picture), "that").attr["d"])
		if drawn.Shown != n+n/2+1 {
			t.Errorf("n = %d: drawn %+v", n, drawn)
		}
		height := func(px float64) float64 { // of the line just behind a place
			h := corners[0][1]
			for _, c := range corners {
				if float64(c[0])/fine <= px+0.2 {
					h = c[1]
				}
			}
			return float64(h) / fine
		}
		all := float64(n + n/5)
		for i, p := range d.lots[0].Spots {
			px := d.x.at(p.X)
			if px < d.l || px > d.r || i+1 < n && d.x.at(d.lots[0].Spots[i+1].X)-px < 0.6 {
				continue // out of the picture, or one step with the next
			}
			want := d.y.at(float64(i+1) / all)
			if got := height(px); math.Abs(got-want) > 0.3 {
				t.Fatalf("n = %d: behind device %d the line is at %.1f px, want %.1f", n, i+1, got, want)
			}
		}
		end := float64(corners[len(corners)-1][1]) / fine
		if want := d.y.at(float64(n) / all); math.Abs(end-want) > 0.3 {
			t.Errorf("n = %d, %d above: the line ends at %.1f px, want %.1f", n, n/5, end, want)
		}
		if n >= 7 && end < d.y.at(1)+10 {
			t.Errorf("n = %d: a lot with devices above reaches 100 %%", n)
		}
	}
}

// A p-channel lot is the mirror image of the n-channel one: the lines of the one
// are those of the other, counted from the other side.
func TestDistributionOfNegativeVoltages(t *testing.T) {
	ref, cand := inventedSteps("A", 40, 3.0, 1), inventedSteps("B", 30, 3.1, 2)
	ref.Above = 3
	plain, _ := AppendDistribution(nil, ref, cand, none())
	mirror := func(s Steps) Steps {
		m := Steps{Name: s.Name, Above: s.Above, Centre: -s.Centre}
		for _, p := range s.Spots {
			p.X = -p.X
			m.Spots = append(m.Spots, p)
		}
		return m
	}
	o := none()
	o.Negative = true
	negative, _ := AppendDistribution(nil, mirror(ref), mirror(cand), o)
	for _, class := range []string{"this", "that"} {
		a, b := stepCorners(t, line(t, read(t, plain), class).attr["d"]), stepCorners(t, line(t, read(t, negative), class).attr["d"])
		if len(a) != len(b) {
			t.Fatalf("%s: %d corners and %d", class, len(a), len(b))
		}
		for i := range a {
			if sum := a[i][0] + b[i][0]; abs(sum-(66+864)*fine) > 2 || abs(a[i][1]-b[i][1]) > 1 {
				t.Fatalf("%s: corner %d is %v and %v", class, i, a[i], b[i])
			}
		}
	}
	if !bytes.Contains(negative, []byte("share of devices at or above")) {
		t.Error("the axis does not say that it counts from the other side")
	}
}

func abs(n int) int {
	if n < 0 {
		return -n
	}
	return n
}

// A lot whose every device lies above, one without devices, one of equal values.
func TestOneSidedDistributions(t *testing.T) {
	plain := inventedSteps("B", 20, 3, 2)
	picture, drawn := AppendDistribution(nil, Steps{Name: "A", Above: 4, Centre: nan}, plain, none())
	list := read(t, picture)
	corners := stepCorners(t, line(t, list, "that").attr["d"])
	if first, last := corners[0], corners[len(corners)-1]; first[1] != last[1] || first[1] != 354*fine || last[0] <= first[0] {
		t.Errorf("a lot that lies above runs from %v to %v", first, last)
	}
	if drawn.Shown != 20 || !strings.Contains(string(picture), "A: 4 above, whose gate voltage is not known") {
		t.Errorf("drawn %+v", drawn)
	}
	picture, drawn = AppendDistribution(nil, Steps{Name: "A", Centre: nan}, Steps{Name: "B", Centre: nan}, none())
	read(t, picture)
	if drawn.Shown != 0 || !strings.Contains(string(picture), "No values to draw.") {
		t.Errorf("drawn %+v", drawn)
	}
	same := Steps{Name: "A", Centre: 3, Spots: []Spot{{Name: "1", X: 3}, {Name: "2", X: 3}, {Name: "3", X: 3}, {Name: "4", X: nan}}}
	picture, drawn = AppendDistribution(nil, same, plain, none())
	if corners := stepCorners(t, line(t, read(t, picture), "that").attr["d"]); len(corners) != 4 || drawn.Empty != 1 {
		t.Errorf("three equal values are %v, drawn %+v", corners, drawn)
	}
}

// Devices of small lots are named, those of large ones marked at every tenth.
func TestDevicesOfDistributionsAreNamed(t *testing.T) {
	small, _ := AppendDistribution(nil, inventedSteps("A", 30, 3, 1), inventedSteps("B", 30, 3, 2), none())
	named := 0
	for _, e := range read(t, small) {
		if strings.Contains(e.title, " of A: ") || strings.Contains(e.title, " of B: ") {
			named++
		}
	}
	if named < 50 { // those far out have no mark
		t.Errorf("%d of 60 devices are named", named)
	}
	large, _ := AppendDistribution(nil, inventedSteps("A", 2000, 3, 1), inventedSteps("B", 30, 3, 2), none())
	tenths := strings.Count(string(large), " % of 2000 devices need no more than ")
	if tenths != 9 {
		t.Errorf("a large lot has %d marks, want 9", tenths)
	}
}

// The aim is 100,000 bytes of pictures for two lots of 5,000 devices.
func TestLargeLotsStaySmall(t *testing.T) {
	ref, cand := inventedSteps("A", 5000, 3, 1), inventedSteps("B", 5000, 3.02, 2)
	best := time.Hour
	var picture []byte
	for range 3 {
		begun := time.Now()
		picture, _ = AppendDistribution(nil, ref, cand, none())
		best = min(best, time.Since(begun))
	}
	t.Logf("%d bytes, %v", len(picture), best)
	if len(picture) > 40_000 {
		t.Errorf("distributions of 5,000 devices a lot take %d bytes", len(picture))
	}
}

func inventedFan(name string, n int, shift float64) Fan {
	f := Fan{Name: name, N: n}
	for _, i := range []float64{1e-3, 1e-2, 0.1, 1} {
		v := 3 + shift + math.Sqrt(i/2)
		f.Currents, f.Middle = append(f.Currents, i), append(f.Middle, v)
		f.Low, f.High, f.Count = append(f.Low, v-0.1), append(f.High, v+0.1), append(f.Count, n)
	}
	return f
}

func TestOverlayShowsBothLots(t *testing.T) {
	ref, cand := inventedFan("A", 30, 0), inventedFan("B", 20, 0.2)
	for _, axis := range []Axis{Linear, SquareRoot, Logarithmic} {
		picture, drawn := AppendOverlay(nil, ref, cand, OverlayOptions{Frame: Frame{ID: "o", Title: "t"}, Axis: axis})
		read(t, picture)
		if drawn.Shown != 2 {
			t.Errorf("%v: drawn %+v", axis, drawn)
		}
		for _, want := range []string{`class="fthis"`, `class="fthat"`, `class="this"`, `class="that"`, "A, reference: n = 30", "B, this lot: n = 20", "median of lot A", "B at 1 A: median 3.907 V, 3.807 V to 4.007 V, n = 20"} {
			if !strings.Contains(string(picture), want) {
				t.Errorf("%v: no %q", axis, want)
			}
		}
	}
	// A gap ends the shade, and a current beyond it alone has none.
	cand.High[2] = nan
	gap, _ := AppendOverlay(nil, ref, cand, OverlayOptions{Frame: Frame{ID: "o"}})
	for _, e := range read(t, gap) {
		corners := len(regexp.MustCompile(`-?[0-9]+`).FindAllString(e.attr["d"], -1)) / 2
		if e.attr["class"] == "fthis" && corners != 4 || e.attr["class"] == "fthat" && corners != 8 {
			t.Errorf("shade %s has %d corners", e.attr["class"], corners)
		}
	}
	// Single curves stand for the shade.
	cand.Curves = []Curve{{Name: "B7", X: []float64{3, 4}, Y: []float64{0, 1}, Ref: 7}}
	picture, drawn := AppendOverlay(nil, ref, cand, OverlayOptions{Frame: Frame{ID: "o"}})
	if strings.Contains(string(picture), `class="fthis"`) || !strings.Contains(string(picture), `data-d="7"`) || drawn.Shown != 3 {
		t.Errorf("single curves: drawn %+v", drawn)
	}
	// p-channel: gate voltages and currents below 0, the curves still rise.
	for _, f := range []*Fan{&ref, &cand} {
		f.Curves = nil
		for i := range f.Middle {
			f.Middle[i], f.Low[i], f.High[i] = -f.Middle[i], -f.Low[i], -f.High[i]
		}
	}
	picture, drawn = AppendOverlay(nil, ref, cand, OverlayOptions{Frame: Frame{ID: "o"}, PChannel: true})
	if drawn.Shown != 2 || !strings.Contains(string(picture), "A at 1 A: median -3.707 V") || !strings.Contains(string(picture), "drain current \u2212I") {
		t.Errorf("p-channel: drawn %+v", drawn)
	}
}

func TestShiftSaysWhereZeroIsLeftOut(t *testing.T) {
	points := []compare.BandPoint{
		{I: 1e-3, Shift: 0.02, Low: -0.01, High: 0.05, Reference: 30, Candidate: 20},
		{I: 1e-2, Shift: 0.03, Low: 0.01, High: 0.05, Reference: 30, Candidate: 19},
		{I: 0.1, Shift: -0.03, Low: -0.05, High: -0.01, Reference: 30, Candidate: 18},
		{I: nan, Shift: 1, Low: 0, High: 2}, {I: 1, Shift: nan, Low: nan, High: nan},
	}
	picture, drawn := AppendShift(nil, points, ShiftOptions{Frame: Frame{ID: "s", Title: "t"}, Margin: 0.04, Level: 0.95})
	text := string(picture)
	if drawn.Shown != 3 || drawn.Empty != 2 {
		t.Errorf("drawn %+v", drawn)
	}
	for _, want := range []string{"at 1 mA: +20 mV, 95 % band -10 mV to +50 mV, n = 30 and 20</title>", "at 10 mA: +30 mV, 95 % band +10 mV to +50 mV, n = 30 and 19 (0 left out)", "at 100 mA: -30 mV, 95 % band -50 mV to -10 mV, n = 30 and 18 (0 left out)", "margin +40 mV", "margin -40 mV", "no shift"} {
		if !strings.Contains(text, want) {
			t.Errorf("no %q", want)
		}
	}
	if n := strings.Count(text, `class="far"`); n != 2 {
		t.Errorf("%d marks stand apart, want 2", n)
	}
	// Zero and the points lie at their places.
	var far []float64
	zero := nan
	for _, e := range read(t, picture) {
		var x, y float64
		if e.attr["class"] == "far" {
			fmt.Sscanf(e.attr["d"], "M%f %f", &x, &y)
			far = append(far, y+6)
		}
		if e.attr["class"] == "zero" {
			fmt.Sscanf(e.attr["d"], "M%f %f", &x, &zero)
		}
	}
	if len(far) != 2 || math.Abs((far[0]+far[1])/2-zero) > 0.2 || far[0] >= zero {
		t.Errorf("+30 and -30 mV are drawn at %v px about zero at %v", far, zero)
	}
}

func TestIntervalAgainstTheMargin(t *testing.T) {
	o := IntervalOptions{Frame: Frame{ID: "i", Title: "t"}, Value: 0.02, Low: 0.005, High: 0.035, Level: 0.95, MarginLow: 0.008, MarginHigh: 0.032, Margin: 0.05}
	list := read(t, AppendInterval(nil, o))
	var widths []float64
	for _, e := range list {
		if strings.HasPrefix(e.attr["class"], "span") {
			var x0, y, x1 float64
			fmt.Sscanf(e.attr["d"], "M%f %fH%f", &x0, &y, &x1)
			widths = append(widths, x1-x0)
		}
	}
	if len(widths) != 2 || math.Abs(widths[0]/widths[1]-0.8) > 0.01 {
		t.Errorf("widths of 24 and 30 mV are %v px", widths)
	}
	o.Margin, o.MarginLow, o.MarginHigh = nan, nan, nan
	text := string(AppendInterval(nil, o))
	if strings.Contains(text, "margin") || strings.Contains(text, `class="room"`) || !strings.Contains(text, "95 % interval") {
		t.Error("without a margin one is drawn")
	}
}

func TestTrendMarksLotsOutside(t *testing.T) {
	run := &compare.Trend{Centre: 3, Low: 2.95, High: 3.05}
	for i := range 6 {
		run.Lots = append(run.Lots, compare.TrendLot{Name: fmt.Sprint("L", i), N: 20, Centre: 3 + 0.01*float64(i), U: 0.005})
	}
	run.Lots[4].Centre, run.Lots[4].Outside = 3.2, true
	run.Lots[2].Centre = nan
	picture, drawn := AppendTrend(nil, run, TrendOptions{Frame: Frame{ID: "t", Title: "t"}, Quantity: "V_GS", This: "L5"})
	text := string(picture)
	if drawn.Shown != 5 || drawn.Empty != 1 || drawn.Labels != 1 {
		t.Errorf("drawn %+v", drawn)
	}
	for _, want := range []string{"L4: 3.2000 ± 0.0050 V, n = 20 (outside the control limits)", "(this lot)", "upper limit", "lower limit", ">mean<", "lots in the order of time"} {
		if !strings.Contains(text, want) {
			t.Errorf("no %q", want)
		}
	}
	read(t, picture)
	many := &compare.Trend{Centre: nan, Low: nan, High: nan, Untimed: true}
	for i := range 1000 {
		many.Lots = append(many.Lots, compare.TrendLot{Name: strings.Repeat("x", 40), N: i, Centre: 3 + 0.001*float64(i%7), U: nan})
	}
	picture, drawn = AppendTrend(nil, many, TrendOptions{Frame: Frame{ID: "t"}})
	read(t, picture)
	if n := strings.Count(string(picture), "rotate(-40)"); n > 45 || drawn.Shown != 1000 {
		t.Errorf("%d names below the picture, drawn %+v", n, drawn)
	}
	if strings.Contains(string(picture), "limit") || !strings.Contains(string(picture), "the order in time is not known of all") {
		t.Error("limits that are not there are drawn, or the order is not doubted")
	}
}

// Whatever comes in, well-formed pictures with finite numbers go out, and what is
// a name stays one.
func TestPicturesOfLotsTakeAnything(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		number := rapid.OneOf(rapid.Float64(), rapid.Float64Range(-5, 5), rapid.SampledFrom([]float64{0, nan, math.Inf(1), math.Inf(-1), 1e300, -1e300, 5e-324}))
		name := rapid.OneOf(rapid.String(), rapid.Just(nasty))
		list := rapid.SliceOfN(number, 0, 12)
		steps := func(l string) Steps {
			s := Steps{Name: name.Draw(t, l), Above: rapid.IntRange(0, 3).Draw(t, l), Centre: number.Draw(t, l)}
			for _, x := range list.Draw(t, l) {
				s.Spots = append(s.Spots, Spot{Name: name.Draw(t, l), X: x, Flag: name.Draw(t, l)})
			}
			return s
		}
		frame := Frame{ID: name.Draw(t, "id"), Title: name.Draw(t, "title"), Desc: name.Draw(t, "desc"), Standalone: rapid.Bool().Draw(t, "own")}
		negative := rapid.Bool().Draw(t, "negative")
		var all [][]byte
		b, _ := AppendDistribution(nil, steps("ref"), steps("cand"), DistributionOptions{Frame: frame, Quantity: name.Draw(t, "q"), Unit: "V", Negative: negative, Margin: number.Draw(t, "margin"), Low: number.Draw(t, "low"), High: number.Draw(t, "high")})
		all = append(all, b)
		fan := func(l string) Fan {
			f := Fan{Name: name.Draw(t, l), Currents: list.Draw(t, l), Middle: list.Draw(t, l), Low: list.Draw(t, l), High: list.Draw(t, l)}
			if rapid.Bool().Draw(t, l) {
				f.Curves = []Curve{{Name: name.Draw(t, l), X: list.Draw(t, l), Y: list.Draw(t, l)}}
			}
			return f
		}
		for _, axis := range []Axis{Linear, SquareRoot, Logarithmic} {
			b, _ = AppendOverlay(nil, fan("ref"), fan("cand"), OverlayOptions{Frame: frame, Axis: axis, PChannel: negative, Levels: []Level{{number.Draw(t, "level"), name.Draw(t, "label")}}})
			all = append(all, b)
		}
		var points []compare.BandPoint
		for _, i := range list.Draw(t, "points") {
			points = append(points, compare.BandPoint{I: i, Shift: number.Draw(t, "s"), Low: number.Draw(t, "l"), High: number.Draw(t, "h")})
		}
		b, _ = AppendShift(nil, points, ShiftOptions{Frame: frame, Margin: number.Draw(t, "margin"), Level: number.Draw(t, "level"), Levels: []Level{{number.Draw(t, "level"), name.Draw(t, "label")}}})
		all = append(all, b, AppendInterval(nil, IntervalOptions{Frame: frame, Value: number.Draw(t, "v"), Low: number.Draw(t, "l"), High: number.Draw(t, "h"), Level: number.Draw(t, "level"), MarginLow: number.Draw(t, "ml"), MarginHigh: number.Draw(t, "mh"), Margin: number.Draw(t, "m")}))
		run := &compare.Trend{Centre: number.Draw(t, "c"), Low: number.Draw(t, "l"), High: number.Draw(t, "h")}
		for _, x := range list.Draw(t, "lots") {
			run.Lots = append(run.Lots, compare.TrendLot{Name: name.Draw(t, "n"), At: name.Draw(t, "at"), Centre: x, U: number.Draw(t, "u"), Outside: rapid.Bool().Draw(t, "out")})
		}
		b, _ = AppendTrend(nil, run, TrendOptions{Frame: frame, Quantity: name.Draw(t, "q"), This: name.Draw(t, "this")})
		for _, b := range append(all, b) {
			read(t, b)
			if bytes.Contains(b, []byte("<script")) || bytes.ContainsAny(b, "\x1b\u202e") {
				t.Fatalf("a name is not escaped in %.200s", b)
			}
		}
	})
}
