package screen

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// glyphs are the large characters, three columns wide and five rows high; '#' is
// filled. The wide face doubles the columns.
var glyphs = map[rune][digitRows]string{
	'0': {"###", "# #", "# #", "# #", "###"},
	'1': {" # ", "## ", " # ", " # ", "###"},
	'2': {"###", "  #", "###", "#  ", "###"},
	'3': {"###", "  #", " ##", "  #", "###"},
	'4': {"# #", "# #", "###", "  #", "  #"},
	'5': {"###", "#  ", "###", "  #", "###"},
	'6': {"###", "#  ", "###", "# #", "###"},
	'7': {"###", "  #", "  #", " # ", " # "},
	'8': {"###", "# #", "###", "# #", "###"},
	'9': {"###", "# #", "###", "  #", "###"},
	'-': {"  ", "  ", "##", "  ", "  "},
	'.': {" ", " ", " ", " ", "#"},
	' ': {"   ", "   ", "   ", "   ", "   "},
	'O': {"###", "# #", "# #", "# #", "###"},
	'V': {"# #", "# #", "# #", "# #", " # "},
	'E': {"###", "#  ", "## ", "#  ", "###"},
	'R': {"## ", "# #", "## ", "# #", "# #"},
	'U': {"# #", "# #", "# #", "# #", "###"},
	'N': {"# #", "###", "###", "###", "# #"},
	'D': {"## ", "# #", "# #", "# #", "## "},
}

const digitRows = 5

// Over and Under stand large where a meter says that it is above or below its
// range, Nothing where nothing has come yet.
const (
	Over    = "OVER"
	Under   = "UNDER"
	Nothing = "----"
)

// face is one size of the large digits.
type face struct{ stretch, gap int }

// faces from the largest on.
var faces = []face{{2, 1}, {1, 1}}

// width of text in large digits.
func (f face) width(text string) int {
	n := 0
	for _, r := range text {
		n += len(glyphs[r][0])*f.stretch + f.gap
	}
	return max(n-f.gap, 0)
}

func (f face) draw(c *canvas, x, y int, text string, st style) {
	for _, r := range text {
		g := glyphs[r]
		for row, line := range g {
			for i, k := range line {
				if k != '#' {
					continue
				}
				for s := range f.stretch {
					c.set(x+i*f.stretch+s, y+row, '█', st)
				}
			}
		}
		x += len(g[0])*f.stretch + f.gap
	}
}

// large gives the text of a value as it is drawn large.
func large(v Value) string {
	text := strings.ReplaceAll(v.Text, "−", "-")
	if text == "" {
		return Nothing
	}
	for _, r := range text {
		if _, ok := glyphs[r]; !ok {
			return Nothing
		}
	}
	return text
}

// between large values, in columns.
const between = 2

// largePart draws the first values large, as many as fit beside one another, two
// in the largest face rather than three in a smaller one. It gives what is left.
func largePart(values []Value, width int) ([]part, []Value) {
	if len(values) == 0 {
		return nil, nil
	}
	places := func(f face, n int) (xs []int, fits bool) {
		x := 0
		for _, v := range values[:n] {
			xs = append(xs, x)
			// A place for the sign is kept, and for a number where there is a word
			// yet, so that nothing moves when they come.
			room := max(f.width("-"+strings.TrimPrefix(large(v), "-")), f.width("-0.000")) + 1 + max(textWidth(clean(v.Unit)), 2)
			x += max(room, 16) + between
		}
		return xs, x-between <= width
	}
	for _, try := range []struct {
		face face
		n    int
	}{{faces[0], 4}, {faces[0], 3}, {faces[0], 2}, {faces[1], 4}, {faces[1], 3}, {faces[1], 2}, {faces[0], 1}, {faces[1], 1}} {
		n := min(try.n, len(values))
		xs, fits := places(try.face, n)
		if !fits {
			continue
		}
		return []part{{digitRows + 2, func(c *canvas, y int) {
			for i, v := range values[:n] {
				right := width
				if i+1 < n {
					right = xs[i+1] - between
				}
				drawLarge(c, try.face, v, xs[i], right, y)
			}
		}}}, values[n:]
	}
	return nil, values
}

// drawLarge draws one value: role and meter, digits with the unit, age and note.
func drawLarge(c *canvas, f face, v Value, x, right, y int) {
	room := right - x
	c.textIn(x, y, room, strings.ToUpper(v.Role), bold)
	if n := textWidth(clean(v.Role)) + 2; n < room {
		c.textIn(x+n, y, room-n, v.Label, faint)
	}
	text, st := large(v), bold
	if v.Stale || v.Text == "" {
		st = faint
	}
	at := x
	if !strings.HasPrefix(text, "-") || text == Nothing {
		at += f.width("-") + f.gap
	}
	f.draw(c, at, y+1, text, st)
	if v.Text != "" {
		c.textIn(at+f.width(text)+1, y+digitRows, room, v.Unit, bold)
	}
	under := x
	note, st := noteOf(v)
	c.textIn(under, y+1+digitRows, room, note, st)
}

// noteOf says how old a value is and what else there is to say, with a shape
// where it must not be believed.
func noteOf(v Value) (string, style) {
	var words []string
	st := faint
	if v.Stale {
		words, st = append(words, "▲ STALE"), caution
	}
	if v.Note != "" {
		if !v.Stale {
			words = append(words, "▲")
		}
		words, st = append(words, v.Note), caution
	}
	if !math.IsNaN(v.Age) && v.Text != "" {
		words = append(words, seconds(v.Age)+" ago")
	}
	return strings.Join(words, " "), st
}

// smallParts show values in one line each, aligned.
func smallParts(values []Value, width int) []part {
	var out []part
	roles, texts := 0, 0
	for _, v := range values {
		roles = max(roles, textWidth(clean(v.Role)))
		texts = max(texts, textWidth(clean(smallText(v))))
	}
	for _, v := range values {
		out = append(out, part{1, func(c *canvas, y int) {
			c.textIn(0, y, roles, v.Role, bold)
			st := bold
			if v.Stale || v.Text == "" {
				st = faint
			}
			text := smallText(v)
			x := roles + 2 + texts - textWidth(clean(text))
			c.textIn(x, y, width-x, text, st)
			x = roles + 2 + texts + 1
			c.textIn(x, y, 5, v.Unit, st)
			note, nst := noteOf(v)
			c.textIn(x+6, y, width-x-6, note, nst)
			if at := x + 6 + 24; width-at > 8 {
				c.textIn(at, y, width-at, v.Label, faint)
			}
		}})
	}
	return out
}

func smallText(v Value) string {
	if v.Text == "" {
		return Nothing
	}
	return v.Text
}

// seconds writes a time so that its width changes rarely.
func seconds(s float64) string {
	switch {
	case s < 9.95:
		return fmt.Sprintf("%.1f s", max(s, 0))
	case s < 99.5:
		return fmt.Sprintf("%.0f s", s)
	case s < 99.5*60:
		return fmt.Sprintf("%.0f min", s/60)
	}
	return fmt.Sprintf("%.0f h", s/3600)
}

// prefixes from 1e-12 to 1e9, in steps of a thousand.
const prefixes = "pnµm kMG"

// Fixed writes a number with the decimals of its meter's display, so that digits
// keep their places from one reading to the next, and gives the unit with its
// prefix. Volts, watts and degrees keep the plain unit; currents and what else
// there is get the prefix that leaves one to three decimals, as displays do. digit
// is one count of the display; 0: not known. What is no number is [Nothing].
func Fixed(x, digit float64, unit string) (text, scaled string) {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return Nothing, unit
	}
	if !(digit > 0) || math.IsInf(digit, 0) {
		digit = math.Pow10(int(math.Floor(math.Log10(max(math.Abs(x), 1e-6)))) - 3)
		if unit == "V" {
			digit = 1e-3
		}
	}
	place := int(math.Floor(math.Log10(digit) + 1e-9)) // of the last digit
	exp := 0
	switch unit {
	case "V", "W", "degC", "%", "":
	default:
		exp = int(math.Ceil(float64(place)/3+1e-9)) * 3
	}
	exp = min(max(exp, -12), 9)
	decimals := min(max(exp-place, 0), 7)
	text = strconv.FormatFloat(x/math.Pow10(exp), 'f', decimals, 64)
	if strings.Trim(text, "-0.") == "" {
		text = strings.TrimPrefix(text, "-")
	}
	return text, prefixed(exp, unit)
}

// FixedShort writes a number that does not change, as short as it can be.
func FixedShort(x float64, unit string) (text, scaled string) {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return Nothing, unit
	}
	exp := 0
	if x != 0 {
		exp = min(max(int(math.Floor(math.Log10(math.Abs(x))/3+1e-9))*3, -12), 9)
	}
	return strconv.FormatFloat(x/math.Pow10(exp), 'g', 4, 64), prefixed(exp, unit)
}

func prefixed(exp int, unit string) string {
	if unit == "degC" {
		return "°C"
	}
	p := []rune(prefixes)[exp/3+4]
	if p == ' ' {
		return unit
	}
	return string(p) + unit
}
