package table

import (
	"regexp"
	"strings"

	"golang.org/x/text/unicode/norm"

	"gatesill/store/record"
)

// heading is what the header of one column says.
type heading struct {
	text    string // as written, blanks at the ends off
	name    string // without unit and current
	role    string // "" when the name is not known
	rank    int
	unit    unit
	hasUnit bool
	odd     string     // a unit that cannot be meant: "MA"
	spot    record.Num // A, the current at which a spot was taken
	spotExp int        // power of ten of spotNum
	spotNum string     // the current as a decimal: "10"
}

// readHeading reads one header: Id (mA), I_D [mA], U_GS/V, vgs_at_10mA_V.
func readHeading(text string) heading {
	h := heading{text: strings.TrimSpace(text)}
	if len(h.text) > 400 {
		return h
	}
	t := strings.Join(strings.Fields(norm.NFKC.String(h.text)), " ")
	h.name = t
	if strings.ContainsAny(t, "([{</") { // T [°C] is no T_C
		if name, u, ok := splitUnit(t); ok && h.named(name) {
			h.name, h.unit, h.hasUnit = name, u, true
			h.settleUnit()
			return h
		}
	}
	if h.named(t) {
		if u, ok := readUnit(t); ok && u.dim == dimOf(h.role) { // just "V"
			h.unit, h.hasUnit = u, true
		}
		return h
	}
	if before, after, ok := h.readSpot(t); ok {
		name := before
		_, u, hasUnit := splitUnit(after)
		if !hasUnit {
			name, u, hasUnit = splitUnit(before)
		}
		if w, ok := lookup(name); ok && (w.role == "vg" || w.role == roleVth || w.role == "gm" || w.role == roleVolt) {
			h.name, h.unit, h.hasUnit = name, u, hasUnit
			h.role, h.rank = w.role, w.rank
			if w.role == roleVth || w.role == roleVolt {
				h.role = "vg"
			}
			h.settleUnit()
			return h
		}
		h.spot, h.spotNum, h.spotExp = record.Num{}, "", 0
	}
	if name, u, ok := splitUnit(t); ok {
		h.name, h.unit, h.hasUnit = name, u, true
		if !h.named(name) && name == "" {
			h.role, h.rank = unitRole[u.dim], weaker
		}
		h.settleUnit()
	}
	if before, _, ok := strings.Cut(t, "@"); ok && h.role == "" { // Id (A) @ Vds = 10 V
		if name, u, ok := splitUnit(before); h.named(name) {
			h.name, h.unit, h.hasUnit = name, u, ok
			h.settleUnit()
		}
	}
	return h
}

// unitRole is what a header that is nothing but a unit stands for.
var unitRole = map[string]string{"V": roleVolt, "A": roleAmp, "degC": "temp", "s": "t", "S": "gm"}

func (h *heading) named(name string) bool {
	w, ok := lookup(name)
	if ok {
		h.role, h.rank = w.role, w.rank
	}
	return ok
}

// settleUnit lets the unit settle the role where the name leaves it open.
func (h *heading) settleUnit() {
	if u, ok := h.unit.as(dimOf(h.role)); ok {
		h.unit = u
	}
	switch {
	case !h.hasUnit:
	case h.role == "vg" && h.unit.dim == "A" && fold(h.name) == "gate":
		h.role = "ig"
	case h.role == roleDrain && h.unit.dim == "A", h.role == roleLoad && h.unit.dim == "A":
		h.role = "id"
	case h.role == roleDrain && h.unit.dim == "V":
		h.role = "vd"
	case h.role == roleTorT && h.unit.dim == "degC", h.role == roleTorT && h.unit.dim == "K", h.role == roleTorT && h.unit.dim == "degF":
		h.role = "temp"
	case h.role == roleTorT, h.role == roleTime:
		if u, ok := h.unit.as("s"); ok {
			h.role, h.unit = "t", u
		}
	case h.role == string(RoleLot) && h.unit.dim == "V": // French 'charge'
		h.role = roleLoad
	}
	if h.hasUnit && h.unit.exp >= 6 && (h.unit.dim == "V" || h.unit.dim == "A" || h.unit.dim == "S") {
		h.odd = h.unit.text
	}
}

// dimOf is the dimension that a role is measured in, "" for texts.
func dimOf(role string) string {
	switch role {
	case "vg", "vl", "vd", "vdd", roleLoad, roleVth, roleVolt:
		return "V"
	case "id", "ig", roleAmp:
		return "A"
	case "gm":
		return "S"
	case "temp":
		return "degC"
	case "t":
		return "s"
	case string(RoleRL):
		return "ohm"
	}
	return ""
}

// quantities by short name.
var quantities = map[string]record.Quantity{
	"vg": record.VG, "id": record.ID, "vl": record.VL, "vd": record.VD, "vdd": record.VDD,
	"ig": record.IG, "gm": record.GM, "temp": record.Temp, "t": record.T,
}

var brackets = map[byte]byte{')': '(', ']': '[', '}': '{', '>': '<'}

// splitUnit takes the unit off a header: in any brackets, behind a slash, behind
// 'in', or as the last word behind a blank, an underscore, a comma or a point.
func splitUnit(t string) (name string, u unit, ok bool) {
	t = strings.TrimSpace(t)
	if name, u, ok = bracketUnit(t); ok {
		return name, u, true
	}
	for _, sep := range []string{"/", " in ", "_in_"} {
		for i := strings.Index(t, sep); i >= 0; {
			if u, ok := readUnit(t[i+len(sep):]); ok {
				return tidy(t[:i]), u, true
			}
			n := strings.Index(t[i+1:], sep)
			if n < 0 {
				break
			}
			i += n + 1
		}
	}
	if i := strings.LastIndexAny(t, " _,.-:;"); i >= 0 {
		if u, ok := readUnit(t[i+1:]); ok {
			return tidy(t[:i]), u, true
		}
	}
	if i := strings.LastIndexAny(t, "_ "); i < 0 {
		if u, ok := readUnit(t); ok { // a header that is nothing but a unit
			return "", u, true
		}
	}
	return t, unit{}, false
}

// bracketUnit takes a unit in brackets off the end.
func bracketUnit(t string) (name string, u unit, ok bool) {
	if t == "" {
		return t, unit{}, false
	}
	open, ok := brackets[t[len(t)-1]]
	if !ok {
		return t, unit{}, false
	}
	i := strings.LastIndexByte(t, open)
	if i < 0 {
		return t, unit{}, false
	}
	if u, ok = readUnit(strings.TrimPrefix(strings.TrimSpace(t[i+1:len(t)-1]), "in ")); !ok {
		return t, unit{}, false
	}
	return tidy(t[:i]), u, true
}

func tidy(s string) string { return strings.Trim(s, " \t_,.:;-/=") }

// spotCurrent finds a current in a header; spotLead is what may stand between
// the name and it.
var (
	spotCurrent = regexp.MustCompile(`([0-9]+(?:[.,][0-9]+)?)[ _]?([fpnum\x{3bc}\x{b5}k]?)[Aa](?:[^A-Za-z/]|$)`)
	spotLead    = regexp.MustCompile(`(?i)(?:[\s_\-,;:(\[{]+(?:at|bei|by|pour|a|à|con|para|per|for|ved|vid|przy|mit|och|@)|@)?[\s_(\[{]*(?:i_?d?(?:s|q|rain)?\s*=)?[\s_]*$`)
)

// readSpot splits a header at the current it names.
func (h *heading) readSpot(t string) (before, after string, ok bool) {
	m := spotCurrent.FindStringSubmatchIndex(t)
	if m == nil || m[0] == 0 {
		return "", "", false
	}
	num := strings.Replace(t[m[2]:m[3]], ",", ".", 1)
	u, ok := readUnit(t[m[4]:m[5]] + "A")
	if !ok {
		return "", "", false
	}
	d, rest, ok := numeral{mark: '.'}.decimal(num)
	if !ok || rest != "" {
		return "", "", false
	}
	x, err := record.ParseNumber(string(d.json(nil, u.exp)), "A")
	if err != nil || x <= 0 {
		return "", "", false
	}
	before, after = t[:m[0]], t[m[5]+1:]
	lead := spotLead.FindStringIndex(before)
	before = before[:lead[0]]
	after = strings.TrimLeft(after, ")]}_ ,;:/-")
	if after != "" && after[0] != '(' && after[0] != '[' && after[0] != '{' && after[0] != '<' {
		after = strings.Trim(after, ")]}")
	}
	if after != "" && !strings.ContainsAny(after, "([{<") {
		after = "(" + after + ")"
	}
	h.spot, h.spotNum, h.spotExp = record.Known(x), string(d.json(nil, 0)), u.exp
	return before, after, tidy(before) != ""
}
