package svg

import (
	"bytes"
	"encoding/xml"
	"errors"
	"fmt"
	"gatesill/report"
	"io"
	"math"
	"math/rand/v2"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// element is an element of a picture that was read back.
type element struct {
	name  string
	attr  map[string]string
	title string
}

// read parses a picture and fails the test unless it is well-formed and every
// number in it is finite.
func read(t interface {
	Helper()
	Fatalf(string, ...any)
}, picture []byte) []element {
	t.Helper()
	d := xml.NewDecoder(bytes.NewReader(picture))
	d.Strict = true
	var list []element
	var open []int
	for {
		tok, err := d.Token()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			t.Fatalf("not well-formed: %v\n%.400s", err, picture)
		}
		switch tok := tok.(type) {
		case xml.StartElement:
			e := element{name: tok.Name.Local, attr: map[string]string{}}
			for _, a := range tok.Attr {
				if _, twice := e.attr[a.Name.Local]; twice {
					t.Fatalf("attribute %s twice in %s", a.Name.Local, e.name)
				}
				e.attr[a.Name.Local] = a.Value
			}
			open = append(open, len(list))
			list = append(list, e)
		case xml.EndElement:
			open = open[:len(open)-1]
		case xml.CharData:
			if n := len(open); n > 1 && list[open[n-1]].name == "title" {
				list[open[n-2]].title += string(tok)
			}
		}
	}
	if len(open) != 0 || len(list) == 0 || list[0].name != "svg" {
		t.Fatalf("no whole picture: %.200s", picture)
	}
	for _, e := range list {
		for _, a := range []string{"x", "y", "width", "height", "d", "viewBox"} {
			if v := e.attr[a]; strings.Contains(v, "NaN") || strings.Contains(v, "Inf") {
				t.Fatalf("%s %s=%q", e.name, a, v)
			}
		}
	}
	return list
}

func curveElements(list []element) (plain, flagged []element) {
	for _, e := range list {
		if e.name != "path" || e.title == "" {
			continue
		}
		if e.attr["class"] == "flag" {
			flagged = append(flagged, e)
		} else {
			plain = append(plain, e)
		}
	}
	return plain, flagged
}

var tokens = regexp.MustCompile(`[Mmlh]|-?[0-9]+`)

// places reads path data of a curve back into fine units.
func places(t *testing.T, d string) (list [][2]int) {
	t.Helper()
	cmd := byte(0)
	x, y := 0, 0
	var nums []int
	flush := func() {
		for len(nums) >= 2 && cmd != 'h' {
			if cmd == 'M' {
				x, y = nums[0], nums[1]
			} else {
				x, y = x+nums[0], y+nums[1]
			}
			nums = nums[2:]
			list = append(list, [2]int{x, y})
			if cmd == 'M' || cmd == 'm' {
				cmd = 'l'
			}
		}
		nums = nil
	}
	for _, tok := range tokens.FindAllString(d, -1) {
		if strings.ContainsAny(tok, "Mmlh") {
			flush()
			cmd = tok[0]
			continue
		}
		n, err := strconv.Atoi(tok)
		if err != nil {
			t.Fatal(err)
		}
		nums = append(nums, n)
	}
	flush()
	return list
}

// A drawn curve passes every one of its points within a third of a pixel, on
// each axis: reading the picture back gives the data back.
func TestCurvesAreWhereTheyShouldBe(t *testing.T) {
	curves := inventedCurves(20, 40)
	for _, axis := range []Axis{Linear, SquareRoot, Logarithmic} {
		tr := &transfer{canvas: &canvas{f: Frame{Width: 880, Height: 500}, l: 84, t: 14, r: 864, d: 454}, o: TransferOptions{Axis: axis}, curves: curves, sign: 1}
		tr.ranges()
		picture, drawn := AppendTransfer(nil, curves, TransferOptions{Frame: Frame{ID: "p"}, Axis: axis})
		if drawn.Shown != len(curves) {
			t.Fatalf("%v: %d of %d drawn", axis, drawn.Shown, len(curves))
		}
		plain, flagged := curveElements(read(t, picture))
		for _, e := range append(plain, flagged...) {
			name, _, _ := strings.Cut(e.title, " ")
			var cv *Curve
			for i := range curves {
				if curves[i].Name == name {
					cv = &curves[i]
				}
			}
			line := places(t, e.attr["d"])
			for i := range cv.X {
				y := tr.y.at(cv.Y[i])
				if axis == Logarithmic && !(cv.Y[i] >= tr.y.lo) {
					continue
				}
				x := tr.x.at(cv.X[i])
				if away := distance(line, x*fine, y*fine) / fine; away > 0.5 {
					t.Errorf("%v: %s: point %d (%g V, %g A) lies %.2f px off its curve", axis, name, i, cv.X[i], cv.Y[i], away)
				}
			}
		}
	}
}

// distance from a point to a broken line.
func distance(line [][2]int, x, y float64) float64 {
	best := math.Inf(1)
	for i := range line {
		ax, ay := float64(line[i][0]), float64(line[i][1])
		bx, by := ax, ay
		if i+1 < len(line) {
			bx, by = float64(line[i+1][0]), float64(line[i+1][1])
		}
		dx, dy := bx-ax, by-ay
		u := 0.0
		if l := dx*dx + dy*dy; l > 0 {
			u = math.Max(0, math.Min(1, ((x-ax)*dx+(y-ay)*dy)/l))
		}
		best = math.Min(best, math.Hypot(x-ax-u*dx, y-ay-u*dy))
	}
	return best
}

func TestHostileNames(t *testing.T) {
	names := []string{
		`<script>alert(1)</script>`, `a & b`, `"quoted" 'names'`, "\x1b[31mred\x1b[0m", "\u202eright to left", "nul\x00byte",
		"bad utf8 \xff\xfe", "]]>", "=1+1", "مقاومة", "二極管", "x\ufffe", strings.Repeat("long ", 60), "a\tb\nc",
	}
	var curves []Curve
	var spots []Spot
	var above []string
	var bins []Bin
	for i, n := range names {
		flag := ""
		if i%2 == 0 {
			flag = n
		}
		curves = append(curves, Curve{Name: n, X: []float64{1, 2, 3}, Y: []float64{0, 0.1, 0.2 + float64(i)/10}, Flag: flag, Out: []int{1}})
		spots = append(spots, Spot{Name: n, X: float64(i), Flag: flag})
		above = append(above, n)
		bins = append(bins, Bin{Name: n, Low: float64(i), High: float64(i + 1)})
	}
	f := Frame{ID: `"><script>`, Title: names[0], Desc: names[2], Focus: 5, Standalone: true}
	a, _ := AppendTransfer(nil, curves, TransferOptions{Frame: f, Levels: []Level{{0.1, names[0]}}})
	b, _ := AppendStrip(nil, spots, StripOptions{Frame: f, Quantity: names[0], Unit: names[1], Bins: bins, Median: 3, Low: 1, High: 5, Above: above})
	for _, picture := range [][]byte{a, b} {
		for _, e := range read(t, picture) {
			if e.name == "script" {
				t.Error("a name became an element")
			}
		}
		for _, bad := range []string{"<script", "\x1b", "\u202e", "\x00", "\xff"} {
			if bytes.Contains(picture, []byte(bad)) {
				t.Errorf("%q stands raw in the picture", bad)
			}
		}
		if !bytes.Contains(picture, []byte("مقاومة")) || !bytes.Contains(picture, []byte(`\x1b[31m`)) {
			t.Error("names are not shown")
		}
	}
}

// Whatever the input, the picture is well-formed with finite numbers.
func TestAnythingIsWellFormed(t *testing.T) {
	odd := rapid.OneOf(rapid.Float64(), rapid.Float64Range(-5, 5), rapid.SampledFrom([]float64{0, math.NaN(), math.Inf(1), math.Inf(-1), 1e308, -1e308, 5e-324, 1e30, 3}))
	list := rapid.SliceOfN(odd, 0, 12)
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(0, 6).Draw(t, "curves")
		var curves []Curve
		var spots []Spot
		var bins []Bin
		for range n {
			curves = append(curves, Curve{
				Name: rapid.String().Draw(t, "name"), X: list.Draw(t, "x"), Y: list.Draw(t, "y"),
				Flag: rapid.StringN(0, 5, -1).Draw(t, "flag"), Out: rapid.SliceOfN(rapid.IntRange(-2, 14), 0, 3).Draw(t, "out"),
			})
			spots = append(spots, Spot{Name: rapid.String().Draw(t, "spot"), X: odd.Draw(t, "value"), Flag: rapid.StringN(0, 5, -1).Draw(t, "f")})
			bins = append(bins, Bin{Name: rapid.String().Draw(t, "bin"), Low: odd.Draw(t, "low"), High: odd.Draw(t, "high")})
		}
		f := Frame{ID: rapid.String().Draw(t, "id"), Title: rapid.String().Draw(t, "title"), Focus: rapid.IntRange(0, 3).Draw(t, "focus"), Standalone: rapid.Bool().Draw(t, "alone")}
		axis := Axis(rapid.IntRange(0, 2).Draw(t, "axis"))
		picture, _ := AppendTransfer(nil, curves, TransferOptions{Frame: f, Axis: axis, PChannel: rapid.Bool().Draw(t, "p"), Levels: []Level{{odd.Draw(t, "level"), "level"}}})
		read(t, picture)
		picture, _ = AppendStrip(nil, spots, StripOptions{
			Frame: f, Quantity: "V_T", Unit: "V", Bins: bins, Median: odd.Draw(t, "m"), Low: odd.Draw(t, "l"), High: odd.Draw(t, "h"),
			Above: rapid.SliceOfN(rapid.String(), 0, 12).Draw(t, "above"), Negative: rapid.Bool().Draw(t, "neg"),
		})
		read(t, picture)
	})
}

func FuzzNames(f *testing.F) {
	f.Add("D1", "<b>", 3.0, 0.1)
	f.Add("\x1b]0;x\x07", "&amp;", math.Inf(1), -1.0)
	f.Fuzz(func(t *testing.T, name, flag string, x, y float64) {
		curves := []Curve{{Name: name, Flag: flag, X: []float64{x, 1, x}, Y: []float64{y, 0.5, y}}, {Name: flag, X: []float64{1, 2}, Y: []float64{y, x}}}
		for _, axis := range []Axis{Linear, SquareRoot, Logarithmic} {
			picture, _ := AppendTransfer(nil, curves, TransferOptions{Frame: Frame{ID: name, Title: flag, Focus: 1}, Axis: axis})
			read(t, picture)
		}
		picture, _ := AppendStrip(nil, []Spot{{Name: name, X: x, Flag: flag, Ref: 1}, {Name: flag, X: y}}, StripOptions{Quantity: flag, Unit: "V", Bins: []Bin{{name, x, y}}, Median: x, Low: y, High: x, Above: []string{name}})
		read(t, picture)
	})
}

func TestLogarithmicAxisDropsWhatIsNotPositive(t *testing.T) {
	c := Curve{Name: "D1", X: []float64{1, 2, 3, 4, 5, 6}, Y: []float64{1e-6, -1e-6, 0, 1e-3, 1e-2, 1e-1}}
	picture, drawn := AppendTransfer(nil, []Curve{c}, TransferOptions{Axis: Logarithmic})
	plain, _ := curveElements(read(t, picture))
	if drawn.Shown != 1 || len(plain) != 1 {
		t.Fatalf("drawn %+v, %d paths", drawn, len(plain))
	}
	d := plain[0].attr["d"]
	if strings.Count(d, "M")+strings.Count(d, "m") != 2 {
		t.Errorf("the curve is not broken where it has no place: %s", d)
	}
	if got := len(places(t, d)); got < 3 || got > 4 {
		t.Errorf("%d places for 4 positive points: %s", got, d)
	}
	all := Curve{Name: "D2", X: []float64{1, 2}, Y: []float64{0, -1}}
	_, drawn = AppendTransfer(nil, []Curve{all}, TransferOptions{Axis: Logarithmic})
	if drawn.Shown != 0 || drawn.Empty != 1 {
		t.Errorf("a curve without a positive current: %+v", drawn)
	}
}

func TestFlaggedStandOut(t *testing.T) {
	curves := inventedCurves(120, 30)
	picture, drawn := AppendTransfer(nil, curves, TransferOptions{Frame: Frame{ID: "p", Focus: 1}})
	list := read(t, picture)
	_, flagged := curveElements(list)
	if len(flagged) != 2 {
		t.Fatalf("%d flagged curves, want 2", len(flagged))
	}
	for _, e := range flagged {
		if e.attr["stroke-dasharray"] == "" {
			t.Errorf("%s has no dashes", e.title)
		}
		if !strings.Contains(e.title, "threshold far from the others") {
			t.Errorf("title %q does not say why", e.title)
		}
	}
	if flagged[0].attr["tabindex"] != "0" || flagged[0].attr["aria-label"] == "" || flagged[1].attr["tabindex"] != "" {
		t.Errorf("focus: %v, %v", flagged[0].attr, flagged[1].attr)
	}
	if drawn.Labels != 2 || !bytes.Contains(picture, []byte(">D0008</text>")) || !bytes.Contains(picture, []byte(">D0108</text>")) {
		t.Errorf("names beside the curves: %+v", drawn)
	}
	if list[0].attr["role"] != "group" {
		t.Errorf("a picture with parts to reach is a %s", list[0].attr["role"])
	}
	still, _ := AppendTransfer(nil, curves, TransferOptions{Frame: Frame{ID: "p"}})
	if e := read(t, still); e[0].attr["role"] != "img" {
		t.Errorf("a picture without parts to reach is a %s", e[0].attr["role"])
	}
}

// A flagged curve far outside does not squash the others.
func TestScaleFollowsTheFamily(t *testing.T) {
	curves := inventedCurves(20, 30)
	curves[0].Flag = "shorted"
	for i := range curves[0].Y {
		curves[0].Y[i] = 50
	}
	tr := &transfer{canvas: &canvas{l: 84, t: 14, r: 864, d: 454}, curves: curves, sign: 1}
	tr.ranges()
	if tr.y.hi > 12 {
		t.Errorf("the axis goes to %g A for a family below 3 A", tr.y.hi)
	}
	_, drawn := AppendTransfer(nil, curves, TransferOptions{})
	if drawn.Beyond != 1 {
		t.Errorf("a curve that leaves the picture is not told: %+v", drawn)
	}
}

func TestPChannelRises(t *testing.T) {
	n := Curve{Name: "P1", X: []float64{-2, -3, -4}, Y: []float64{-1e-6, -0.1, -0.5}}
	picture, _ := AppendTransfer(nil, []Curve{n}, TransferOptions{PChannel: true})
	plain, _ := curveElements(read(t, picture))
	p := places(t, plain[0].attr["d"])
	if first, last := p[0], p[len(p)-1]; last[0] >= first[0] || last[1] >= first[1] {
		t.Errorf("from %v to %v: must go left and up", first, last)
	}
	if !bytes.Contains(picture, []byte("\u2212I")) || !bytes.Contains(picture, []byte(">-3.0</text>")) && !bytes.Contains(picture, []byte(">-3</text>")) {
		t.Error("signs are not shown")
	}
}

func TestTicks(t *testing.T) {
	check := func(kind Axis, lo, hi float64, want ...string) {
		t.Helper()
		s := newScale(kind, lo, hi, 0, 440)
		var got []string
		for _, k := range s.ticks(44, scaleOf(hi)) {
			if !k.minor {
				got = append(got, k.label)
			}
		}
		if fmt.Sprint(got) != fmt.Sprint(want) {
			t.Errorf("%v %g to %g: %q, want %q", kind, lo, hi, got, want)
		}
	}
	check(Linear, 0, 1, "0", "0.1", "0.2", "0.3", "0.4", "0.5", "0.6", "0.7", "0.8", "0.9", "1.0")
	check(Linear, -0.2, 0.8, "-200", "-100", "0", "100", "200", "300", "400", "500", "600", "700", "800")
	check(Logarithmic, 1e-6, 1, "1 µA", "10 µA", "100 µA", "1 mA", "10 mA", "100 mA", "1 A")
	check(Logarithmic, 0.01, 0.1, "10 mA", "20 mA", "50 mA", "100 mA")
	check(Logarithmic, 0.5, 3, "500 mA", "1 A", "2 A")
	for _, kind := range []Axis{Linear, SquareRoot} {
		s := newScale(kind, 0, 2.5, 0, 440)
		last := math.Inf(-1)
		list := s.ticks(44, scaleOf(2.5))
		if len(list) < 4 || len(list) > 14 {
			t.Errorf("%v: %d ticks", kind, len(list))
		}
		for _, k := range list {
			if at := s.at(k.value); at-last < 20 {
				t.Errorf("%v: tick %s stands %.0f px from the one before", kind, k.label, at-last)
			} else {
				last = at
			}
		}
	}
}

func TestStripMarksEveryDeviceAtItsValue(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	var spots []Spot
	for i := range 300 {
		s := Spot{Name: fmt.Sprintf("D%03d", i), X: 3 + 0.1*rng.NormFloat64()}
		if i%60 == 5 {
			s.Flag = "odd"
		}
		spots = append(spots, s)
	}
	o := StripOptions{Frame: Frame{ID: "s"}, Quantity: "V_GS(th)", Unit: "V", Median: 3, Low: 2.7, High: 3.3, Bins: []Bin{{"A", 2.9, 3}, {"B", 3, 3.1}}, Above: []string{"X1"}}
	picture, drawn := AppendStrip(nil, spots, o)
	list := read(t, picture)
	if drawn.Shown != 300 {
		t.Fatalf("drawn %+v", drawn)
	}
	seen := map[string]float64{}
	for _, e := range list {
		if e.name == "path" && e.title != "" {
			name, _, _ := strings.Cut(e.title, " ")
			var x, y float64
			if _, err := fmt.Sscanf(e.attr["d"], "M%f %f", &x, &y); err != nil {
				t.Fatalf("%q: %v", e.attr["d"], err)
			}
			seen[name] = x
		}
	}
	// The places must be a straight line of the values.
	a, b := spots[0], spots[1]
	slope := (seen[b.Name] - seen[a.Name]) / (b.X - a.X)
	for _, s := range spots {
		want := seen[a.Name] + slope*(s.X-a.X)
		if got, ok := seen[s.Name]; !ok || math.Abs(got-want) > 1 {
			t.Errorf("%s at %g px, want %.1f", s.Name, got, want)
		}
	}
	if _, ok := seen["X1"]; !ok || !bytes.Contains(picture, []byte("above: 1")) {
		t.Error("the device above the range is not shown")
	}
	// The order of the input does not matter.
	rng.Shuffle(len(spots), func(i, j int) { spots[i], spots[j] = spots[j], spots[i] })
	again, _ := AppendStrip(nil, spots, o)
	if !bytes.Equal(picture, again) {
		t.Error("another order of the devices gives another picture")
	}
}

func scaleOf(hi float64) report.Scale { return report.ScaleOf("A", hi) }

// A reading at the off voltage far below must not take most of the picture on
// the axes where it shows nothing; on the logarithmic axis it stays.
func TestOffVoltageDoesNotTakeThePicture(t *testing.T) {
	curves := []Curve{{Name: "D1", X: []float64{0, 2.9, 3.0, 3.1, 3.2}, Y: []float64{1e-4, 1e-4, 0.01, 0.05, 0.1}}}
	for axis, whole := range map[Axis]bool{Linear: false, SquareRoot: false, Logarithmic: true} {
		tr := &transfer{canvas: &canvas{}, o: TransferOptions{Axis: axis}, curves: curves, sign: 1}
		tr.l, tr.r, tr.t, tr.d = 0, 100, 0, 100
		tr.ranges()
		if got := tr.x.lo <= 0; got != whole {
			t.Errorf("%v: the axis begins at %g V", axis, tr.x.lo)
		}
		if tr.x.hi < 3.2 || tr.x.lo > 2.95 {
			t.Errorf("%v: the axis runs from %g to %g V", axis, tr.x.lo, tr.x.hi)
		}
	}
	// p-channel: the far side is the upper one.
	mirrored := []Curve{{Name: "D1", X: []float64{0, -2.9, -3.0, -3.1, -3.2}, Y: []float64{-1e-4, -1e-4, -0.01, -0.05, -0.1}}}
	tr := &transfer{canvas: &canvas{}, o: TransferOptions{Axis: Linear, PChannel: true}, curves: mirrored, sign: -1}
	tr.l, tr.r, tr.t, tr.d = 0, 100, 0, 100
	tr.ranges()
	if tr.x.hi > -2 || tr.x.lo > -3.2 {
		t.Errorf("p-channel: the axis runs from %g to %g V", tr.x.lo, tr.x.hi)
	}
}
