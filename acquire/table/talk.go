package table

import (
	"regexp"
	"slices"
	"strconv"
	"strings"
	"unicode"

	"gatesill/store/record"
)

const (
	maxTalk      = 1000 // bytes of a comment that are looked at
	maxTalkLines = 1000
)

// What comments may say besides the words of headers.
var talkWords = map[string]string{}

const (
	talkTol       = "tolerance"
	talkRating    = "rating"
	talkCircuit   = "circuit"
	talkAmmeter   = "ammeter"
	talkBurden    = "burden"
	talkSpot      = "spot"
	talkPulse     = "pulse width"
	talkDuty      = "duty"
	talkDelay     = "delay"
	talkDwell     = "dwell"
	talkPulsed    = "pulsed"
	talkGateReset = "gate return"
	talkChannel   = "channel"
)

func init() {
	for kind, list := range map[string]string{
		talkTol:       "tolerance tol rltol rltolerance toleranz rltoleranz tolerancia tolleranza tolerancja",
		talkRating:    "rlrating rating ratedpower rlpower belastbarkeit",
		talkCircuit:   "circuit schaltung circuito schakeling uklad messschaltung",
		talkAmmeter:   "ammeter amperemeter ammeterin strommesser amperimetro ampermetro",
		talkBurden:    "burden burdenresistance ammeterburden burde buerde",
		talkSpot:      "spotcurrent testcurrent current idrain id draincurrent teststrom prufstrom pruefstrom messstrom",
		talkPulse:     "pulsewidth pulse pulsbreite pulsdauer pulslange",
		talkDuty:      "duty dutycycle tastgrad tastverhaltnis",
		talkDelay:     "pulsedelay samplingdelay",
		talkDwell:     "dwell dwelltime settle settling settlingtime settletime wartezeit",
		talkPulsed:    "pulsed",
		talkChannel:   "channel channeltype polarity kanal kanaltyp kanalart polaritat canal canale kanaal",
		talkGateReset: "gatereturn gatemeterreturn",
	} {
		for _, w := range strings.Fields(list) {
			talkWords[w] = kind
		}
	}
}

// addTalk keeps a comment that stands among the rows.
func (r *reader) addTalk(line int, row []byte) {
	if len(r.talk) < maxTalkLines {
		r.talk = append(r.talk, remarkLine{line, string(row[:min(len(row), maxTalk)])})
	}
}

// bare takes the comment mark off.
func bare(text string) string {
	return strings.TrimSpace(strings.TrimLeft(text, "#%!;/' \t"))
}

// talkDevice is the device that a comment names, "" for none, and how sure that
// is: a serial before a 'device', which may be the type. Words for a sample are
// not taken: they say how the lot was drawn.
func talkDevice(text string) (name string, rank int) {
	for _, s := range listen(text) {
		if s.kind != string(RoleDevice) {
			continue
		}
		switch f := fold(s.key); {
		case strings.HasPrefix(f, "ser") || f == "sn" || f == "snr" || f == "dut" || strings.HasPrefix(f, "pru") || f == "exemplar" || f == "specimen":
			rank = 0
		case strings.HasPrefix(f, "dev"):
			rank = 1
		default:
			continue
		}
		return strings.Trim(s.value, `" `), rank
	}
	return "", 0
}

// readTalk takes from comments what was said of the conditions. It is called
// before the rows, for what they depend on, and again when all comments and the
// decimal mark are known.
func (r *reader) readTalk() {
	r.talkCond, r.talkText, r.file.Proposed = record.Condition{}, map[Role]string{}, nil
	r.talkChannel, r.unread = "", nil
	r.file.Remarks = slices.DeleteFunc(r.file.Remarks, func(m Remark) bool { return m.Code == CodeCommentsDiffer })
	best := 2
	for _, t := range r.talk {
		for _, s := range listen(t.text) {
			r.propose(t.line, s)
		}
		r.proposeText(t.line, "channel", channelOf(bare(t.text)), &r.talkChannel)
		if name, rank := talkDevice(t.text); name != "" && rank < best && t.line < r.bodyLine {
			r.talkDevice, best = name, rank
		}
	}
}

// propose takes one thing that a comment says, when it can be read.
func (r *reader) propose(line int, s said) {
	c := &r.talkCond
	switch s.kind {
	case string(RoleOperator), string(RoleFixture), string(RoleDate), string(RoleDateCode), string(RoleMarking), string(RoleTube), roleTime:
		role := Role(s.kind)
		if s.kind == roleTime {
			role = RoleDate
		}
		value := cut(strings.Trim(s.value, `" `), record.MaxName)
		if have := r.talkText[role]; have == "" {
			r.talkText[role] = value
			r.proposed(line, string(role), value)
		}
	case talkCircuit:
		r.proposeWord(line, s, "circuit", circuitOf(s.value), (*string)(&c.Circuit))
	case talkAmmeter:
		r.proposeWord(line, s, "ammeter", oneOf(s.value, "drain", "source", "none"), &c.Ammeter)
	case talkGateReset:
		r.proposeWord(line, s, "gate return", oneOf(s.value, "source", "ground"), &c.GateReturn)
	case talkChannel:
		r.proposeWord(line, s, "channel", channelWord(s.value), &r.talkChannel)
	case talkPulsed:
		word := oneOf(s.value, "pulsed", "dc")
		if word == "" {
			word = map[string]string{"yes": "pulsed", "ja": "pulsed", "no": "dc", "nein": "dc"}[fold(s.value)]
		}
		r.proposeWord(line, s, "mode", word, &c.Pulsed)
	default:
		r.proposeNumber(line, s)
	}
}

// proposeNumber takes a condition that is a number.
func (r *reader) proposeNumber(line int, s said) {
	c := &r.talkCond
	var to *record.Num
	dim := dimOf(s.kind)
	name := s.kind
	switch s.kind {
	case "vdd":
		name, to = "V_DD", &c.VDD
	case "vd":
		name, to = "V_DS", &c.VDS
	case string(RoleRL):
		name, to = "R_L", &c.RL
		r.proposeFraction(line, "tolerance of R_L", s.value, &c.RLTol)
		if x, ok := talkNumber(afterNumber(s.value), "W", unit{}, r.num.mark); ok {
			r.proposeNum(line, "rating of R_L", x, "W", &c.RLRating)
		}
	case "temp":
		name, to = "temperature", &c.Temp
		r.proposeText(line, "temperature of", tempOf(s.key), &c.TempOf)
	case talkTol:
		if !r.proposeFraction(line, "tolerance of R_L", s.value, &c.RLTol) {
			r.cannotRead(line, s)
		}
	case talkDuty:
		if !r.proposeFraction(line, "duty cycle", s.value, &c.PulseDuty) {
			r.cannotRead(line, s)
		}
	case talkRating:
		name, dim, to = "rating of R_L", "W", &c.RLRating
	case talkBurden:
		name, dim, to = "burden of the ammeter", "ohm", &c.Burden
	case talkSpot:
		name, dim, to = "spot current", "A", &c.SpotCurrent
	case talkPulse:
		name, dim, to = "pulse width", "s", &c.PulseWidth
	case talkDelay:
		name, dim, to = "pulse delay", "s", &c.PulseDelay
	case talkDwell:
		name, dim, to = "dwell", "s", &c.Dwell
	}
	if to == nil {
		return
	}
	x, ok := talkNumber(s.value, dim, s.unit, r.num.mark)
	if !ok {
		r.cannotRead(line, s)
		return
	}
	r.proposeNum(line, name, x, dim, to)
}

// cannotRead keeps a condition that looks like one and cannot be read, to be
// told once all comments are known.
func (r *reader) cannotRead(line int, s said) {
	if len(r.unread) < keptRows {
		r.unread = append(r.unread, remarkLine{line, cut(s.key, 40) + " = " + cut(s.value, 60)})
	}
}

// proposeWord is proposeText for a word out of a few; "" is none of them.
func (r *reader) proposeWord(line int, s said, name, word string, to *string) {
	if word == "" {
		r.cannotRead(line, s)
		return
	}
	r.proposeText(line, name, word, to)
}

func (r *reader) proposeNum(line int, name string, x float64, dim string, to *record.Num) {
	if have, ok := to.Get(); ok {
		if have != x {
			r.remark(CodeCommentsDiffer, "line %d says %s %g %s, a line above says %g: the first is kept", line, name, x, dim, have)
		}
		return
	}
	*to = record.Known(x)
	r.proposed(line, name, strconv.FormatFloat(x, 'g', -1, 64)+" "+dim)
}

func (r *reader) proposeText(line int, name, value string, to *string) {
	switch {
	case value == "":
	case *to == "":
		*to = value
		r.proposed(line, name, value)
	case *to != value:
		r.remark(CodeCommentsDiffer, "line %d says %s %s, a line above says %s: the first is kept", line, name, value, *to)
	}
}

// proposeFraction takes a percentage, and reports whether there was one.
func (r *reader) proposeFraction(line int, name, text string, to *record.Num) bool {
	m := percent.FindStringSubmatch(text)
	if m == nil {
		return false
	}
	x, err := strconv.ParseFloat(strings.Replace(m[1], ",", ".", 1), 64)
	if err != nil || x <= 0 || x > 100 {
		return false
	}
	if have, ok := to.Get(); !ok || have != x/100 {
		r.proposeNum(line, name, x/100, "of it", to)
	}
	return true
}

func (r *reader) proposed(line int, name, value string) {
	r.file.Proposed = append(r.file.Proposed, name+" "+value+" (line "+strconv.Itoa(line)+")")
}

var (
	percent   = regexp.MustCompile(`([0-9]+(?:[.,][0-9]+)?)\s*%`)
	numberIn  = regexp.MustCompile(`^[~≈=]?\s*([+-]?[0-9]+(?:[.,][0-9]+)?(?:[eE][+-]?[0-9]+)?)\s*([^\s,;±()%0-9]*)`)
	thousands = regexp.MustCompile(`^[+-]?[1-9][0-9]{0,2},[0-9]{3}$`)
)

// talkNumber reads the number that a text begins with, in the dimension. A bare
// one is in the unit of the key, else in the base unit. A comma that may stand
// between thousands is read only when the file has decimal commas.
func talkNumber(text, dim string, key unit, mark byte) (float64, bool) {
	m := numberIn.FindStringSubmatch(text)
	if m == nil || thousands.MatchString(m[1]) && mark != ',' {
		return 0, false
	}
	num := strings.Replace(m[1], ",", ".", 1)
	exp := 0
	u, isUnit := readUnit(m[2])
	if isUnit {
		u, isUnit = u.as(dim)
	}
	switch {
	case m[2] == "":
		if k, ok := key.as(dim); ok {
			exp = k.exp
		} else if dim == "W" {
			return 0, false // a rating must say W
		}
	case isUnit:
		exp = u.exp
	default: // 4k7, 10R
		first := strings.Fields(text)[0]
		if first == m[1] { // a number, a blank, and no unit of this
			return 0, false
		}
		x, err := record.ParseNumber(strings.Replace(first, ",", ".", 1), dim)
		return x, err == nil && dim != "W"
	}
	d, rest, ok := numeral{mark: '.'}.decimal(num)
	if !ok || rest != "" {
		return 0, false
	}
	x, err := strconv.ParseFloat(string(d.json(nil, exp)), 64)
	return x, err == nil
}

// afterNumber is what stands behind the first number and its unit; there the
// rating of a resistor may follow.
func afterNumber(text string) string {
	if i := strings.IndexAny(text, " ,"); i >= 0 {
		fields := strings.FieldsFunc(text[i:], func(c rune) bool { return c == ' ' || c == ',' })
		for j, f := range fields {
			if strings.HasSuffix(f, "W") && len(f) > 1 {
				return f
			}
			if f == "W" && j > 0 {
				return fields[j-1] + " W"
			}
		}
	}
	return ""
}

// circuitOf reads how a comment names the circuit, word by word.
func circuitOf(text string) string {
	has := func(prefixes ...string) bool {
		for _, w := range strings.FieldsFunc(text, func(c rune) bool { return !unicode.IsLetter(c) && c != '_' }) {
			f := fold(w)
			for _, p := range prefixes {
				if f == p || len(p) > 3 && strings.HasPrefix(f, p) {
					return true
				}
			}
		}
		return false
	}
	switch {
	case has("diode"), has("drain", "drains") && has("gate"):
		return string(record.Diode)
	case has("fixed", "constant", "fest", "konstant"):
		return string(record.Fixed)
	case has("load", "last", "lastwiderstand", "charge", "carga", "carico", "resistor", "widerstand", "rl"):
		return string(record.Load)
	}
	return ""
}

// oneOf gives the first of the words that the text names.
func oneOf(text string, list ...string) string {
	f := fold(text)
	for _, w := range list {
		if strings.Contains(f, w) {
			return w
		}
	}
	return ""
}

// tempOf tells from the name of a temperature of what it is.
func tempOf(name string) string {
	switch f := fold(name); {
	case f == "tc" || strings.Contains(f, "case") || strings.Contains(f, "gehause") || strings.Contains(f, "gehaeuse"):
		return "case"
	case f == "ta" || strings.Contains(f, "amb") || strings.Contains(f, "umg") || strings.Contains(f, "room"):
		return "ambient"
	case f == "ths" || strings.Contains(f, "sink") || strings.Contains(f, "kuhl") || strings.Contains(f, "kuehl"):
		return "sink"
	}
	return ""
}
