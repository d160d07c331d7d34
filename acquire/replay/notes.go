package replay

import (
	"fmt"
	"strings"
	"unicode"

	"gatesill/acquire/table"
	"gatesill/store/record"
)

// Words of notes, folded to lower case. English and German; from memory of how
// people jot, common practice, no source.
var (
	nounWords = set(`device dev part dut fet mosfet transistor sample specimen unit bauteil teil prüfling pruefling exemplar muster`)
	countWord = set(`no no. nr nr. number nummer num`)
	inWords   = set(`in into inserted insert socket socketed fixture plugged mounted placed start started starting begin beginning now next change changed swap swapped new
		drin rein ein eingesetzt eingelegt gesteckt start beginn jetzt nächstes naechstes wechsel neu fassung`)
	outWords = set(`out removed remove pulled taken end ended finished done empty stop stopped raus aus entfernt entnommen ende fertig leer gezogen`)
	fillers  = set(`the a an is was are of from to on at with for again put socket fixture der die das ist war im wieder von zu auf und and mit`)
)

func set(words string) map[string]bool {
	m := map[string]bool{}
	for _, w := range strings.Fields(words) {
		m[w] = true
	}
	return m
}

// ReadNotes reads a file of notes: a time, then free text, in each line. The times
// are of one form as in a log. What a note says of devices is found by its words;
// one that may be read in two ways is asked about or refused with its line.
func ReadNotes(path string, opt Options) (*Log, []Note, error) {
	t, err := table.ReadText(path, opt.Table)
	if err != nil {
		return nil, nil, err
	}
	return readNotes(t, path, opt)
}

func readNotes(t *table.Text, path string, opt Options) (*Log, []Note, error) {
	l := &Log{Role: notesRole, Path: path, Name: t.Name, Hash: t.Hash, Size: t.Size}
	l.Found = Found{Role: notesRole, File: t.Name, Encoding: t.Encoding, Notes: t.Notes, Delimiter: "none"}
	if l.Found.Notes == nil {
		l.Found.Notes = []string{}
	}
	rd := &logReader{text: t, log: l, opt: opt, clockCol: -1, mark: '.'}
	var notes []Note
	for row := range t.Rows(0) {
		if row.Comment && len(row.Text) > 0 && row.Text[0] != '\'' {
			continue
		}
		line := strings.TrimSpace(string(row.Text))
		time, text := cutTime(line)
		if time == "" {
			if len(notes) == 0 && len(rd.header) == 0 {
				rd.header = []string{line} // time,note
				continue
			}
			return nil, nil, t.Refuse(row.Line, "begin every note with its time", "no time before the note %q", clip([]byte(line)))
		}
		rd.sample = append(rd.sample, sampled{line: row.Line, text: line, cells: []string{time}})
		notes = append(notes, Note{Line: row.Line, Text: text})
	}
	if len(notes) == 0 {
		return nil, nil, t.Refuse(0, "a note is a line of a time and a text: 10:02:03 device D7 in", "it holds no notes")
	}
	if err := rd.settleNoteForm(); err != nil {
		return nil, nil, err
	}
	var in []instant
	for _, s := range rd.sample {
		at, why := rd.timeOf([][]byte{[]byte(s.cells[0])})
		if why != "" {
			return nil, nil, t.Refuse(s.line, "write all times of the file in one form", "%s", why)
		}
		in = append(in, at)
		l.Entries = append(l.Entries, Entry{Line: s.line})
	}
	l.Rows = len(in)
	times, res, lost := settleFractions(in)
	if l.Found.Resolution = res; lost != "" {
		l.note("%s", lost)
	}
	if err := l.settleSteps(t, times); err != nil {
		return nil, nil, err
	}
	l.jumps = nil // an hour without a note is no sign
	for i := range notes {
		l.Entries[i].At, notes[i].At = times[i], times[i]
	}
	l.Found.Readings = len(notes)
	return l, notes, readTexts(t, notes, opt)
}

// settleNoteForm is settleForm for notes: the time is all there is of a row.
func (rd *logReader) settleNoteForm() error {
	rd.width = 1
	most, counts := noTime, map[look]int{}
	for _, s := range rd.sample {
		l := aNumeral
		if st, ok := readStamp(s.cells[0]); ok {
			l = st.look
		}
		if counts[l]++; counts[l] > counts[most] {
			most = l
		}
	}
	f := &rd.log.Found.Form
	switch most {
	case aZoned:
		*f = Zoned
	case aMoment:
		*f = Local
	case aClock:
		if err := rd.settleClock(); err != nil {
			return err
		}
	case aNumeral:
		v := rd.values(0)
		*f = unixForm(v[len(v)/2])
	default:
		return rd.text.Refuse(rd.sample[0].line, "begin every note with a time", "the notes have dates, but no times")
	}
	given := rd.opt.Times[notesRole]
	if given != "" && given != "elapsed" && given != "clock" {
		if !f.elapsed() {
			return rd.text.Refuse(0, "", "--log-times notes=%s: its times are %s and have their own origin", given, *f)
		}
		rd.log.start = given
	}
	return rd.settleOrder()
}

// cutTime takes the time off the front of a line: "" when there is none.
func cutTime(line string) (time, text string) {
	cut := func(n int) (string, string) {
		i, end := 0, 0
		for range n {
			for i < len(line) && strings.IndexByte(" \t;,|", line[i]) >= 0 {
				i++
			}
			for i < len(line) && strings.IndexByte(" \t;|", line[i]) < 0 && !(line[i] == ',' && (i+1 >= len(line) || line[i+1]-'0' > 9 || i == 0 || line[i-1]-'0' > 9)) {
				i++
			}
			end = i
		}
		return strings.Trim(strings.ReplaceAll(line[:end], "\t", " "), ` "[]`), strings.Trim(line[end:], " \t;,|:-\"]")
	}
	for _, n := range []int{3, 2, 1} { // date, time and zone or AM; date and time; time
		head, tail := cut(n)
		if tail == "" && n > 1 {
			continue
		}
		if s, ok := readStamp(strings.NewReplacer(";", " ", "|", " ").Replace(head)); ok && s.look != aDate {
			return strings.NewReplacer(";", " ", "|", " ").Replace(head), tail
		}
	}
	head, tail := cut(1)
	if head != "" && strings.Trim(head, "0123456789.") == "" && head != "." && strings.Count(head, ".") <= 1 {
		return head, tail
	}
	return "", line
}

// readTexts finds what the notes say of devices.
func readTexts(t *table.Text, notes []Note, opt Options) error {
	current := ""
	for i := range notes {
		n := &notes[i]
		in, out, why := readNote(n.Text, current)
		if why != "" {
			answer, err := t.Ask(table.Question{
				Text: fmt.Sprintf("the note %q in line %d: %s; which device is in the socket from then on (- for none)", clip([]byte(n.Text)), n.Line, why), Flag: "--meter-logs notes=",
			}, n.Line, "write the note as 'device NAME in', 'removed', or without a name of a device")
			if err != nil {
				return err
			}
			in, out = strings.TrimSpace(answer), false
			if in == "-" || in == "" {
				in, out = "", true
			}
		}
		if in != "" {
			if err := record.CheckName("device", in); err != nil {
				return t.Refuse(n.Line, "write the note as 'device NAME in'", "%v", err)
			}
		}
		n.In, n.Out = in, out
		if in != "" {
			current = in
		} else if out {
			current = ""
		}
	}
	return nil
}

// word is a word of a note.
type word struct {
	text, low string
}

// readNote finds the device that goes in, and whether one goes out. The text why
// is not empty when it may be read in two ways.
func readNote(text, current string) (in string, out bool, why string) {
	for _, clause := range clauses(text) {
		i, o, w := readClause(clause, current)
		if w != "" {
			return "", false, w
		}
		switch {
		case i != "" && in != "":
			return "", false, "it names two devices"
		case i != "":
			in = i
		}
		out = out || o
		if o {
			current = ""
		}
	}
	return in, out, ""
}

// clauses cuts a note at commas, semicolons and points, and before 'and' and
// 'then'.
func clauses(text string) [][]word {
	var list [][]word
	var now []word
	flush := func() {
		if len(now) > 0 {
			list = append(list, now)
		}
		now = nil
	}
	for _, f := range strings.Fields(text) {
		end := strings.HasSuffix(f, ",") || strings.HasSuffix(f, ";") || strings.HasSuffix(f, ".") && len(f) > 3 || strings.HasSuffix(f, "!")
		f = strings.Trim(f, ".,;:!?()\"'=")
		if f == "->" || f == "→" {
			now = append(now, word{text: "change", low: "change"})
			continue
		}
		low := strings.ToLower(f)
		if low == "and" || low == "then" || low == "und" || low == "dann" {
			flush()
			continue
		}
		if f != "" && len(now) < 60 {
			now = append(now, word{text: f, low: low})
		}
		if end {
			flush()
		}
	}
	flush()
	return list
}

func readClause(words []word, current string) (in string, out bool, why string) {
	var names []string
	add := func(name string) {
		for _, n := range names {
			if n == name {
				return
			}
		}
		names = append(names, name)
	}
	goesIn, goesOut, noun, either, others := false, false, false, false, 0
	for i := 0; i < len(words); i++ {
		w := words[i]
		next := func(k int) *word {
			if i+k < len(words) {
				return &words[i+k]
			}
			return nil
		}
		switch {
		case w.low == "or" || w.low == "oder":
			either = true
		case strings.HasPrefix(w.text, "#") && len(w.text) > 1:
			add(w.text[1:])
		case w.text == "#" || nounWords[w.low] || countWord[w.low]:
			noun = noun || nounWords[w.low] || w.text == "#"
			j := 1
			for n := next(j); n != nil && (countWord[n.low] || n.text == "#"); n = next(j) {
				j++
			}
			if n := next(j); n != nil && (j > 1 || countWord[w.low] || w.text == "#" || namely(n.text) || !known(n.low) && j == 1 && shortWord(n.text)) && !(known(n.low) && !namely(n.text)) {
				add(strings.TrimPrefix(n.text, "#"))
				i += j
			}
		case inWords[w.low] && !(outWords[w.low]):
			goesIn = true
		case outWords[w.low]:
			goesOut = true
		case fillers[w.low]:
		case looksNamed(w.text):
			add(w.text)
		default:
			others++
		}
	}
	switch {
	case len(names) > 1 && (goesIn || goesOut || noun || either):
		return "", false, "it names " + strings.Join(names, " and ")
	case goesIn && goesOut:
		if len(names) == 0 { // "taken out of the socket"
			return "", true, ""
		}
		if current == names[0] {
			return "", true, ""
		}
		return "", false, "it says in and out at once"
	case len(names) > 1:
		return "", false, "" // talk with several codes in it
	case goesOut:
		if len(names) == 0 && others > 1 && !noun && current == "" {
			return "", false, ""
		}
		return "", true, ""
	case goesIn && len(names) == 1:
		return names[0], false, ""
	case goesIn && noun:
		return "", false, "it names no device"
	case goesIn && others == 0 && !onlyTalk(words):
		return "", false, "it names no device"
	case len(names) == 1 && (noun || others == 0):
		if names[0] == current {
			return "", false, ""
		}
		return names[0], false, ""
	case len(names) == 1 && names[0] != current && strings.ContainsAny(names[0], "0123456789") && unicode.IsLetter(rune(names[0][0])):
		return "", false, "it names " + names[0] + ", but not whether it goes in"
	}
	return "", false, ""
}

// onlyTalk reports whether words like 'start' stand alone: the sitting began.
func onlyTalk(words []word) bool {
	for _, w := range words {
		switch w.low {
		case "start", "started", "begin", "beginning", "beginn", "starting", "now", "jetzt":
		default:
			return false
		}
	}
	return true
}

func known(low string) bool {
	return nounWords[low] || countWord[low] || inWords[low] || outWords[low] || fillers[low] || low == "or" || low == "oder"
}

// namely reports whether a word behind 'device' is a name for certain: it has a
// digit, or is a single letter.
func namely(t string) bool {
	t = strings.TrimPrefix(t, "#")
	return strings.ContainsAny(t, "0123456789") || len([]rune(t)) == 1 && unicode.IsUpper([]rune(t)[0])
}

// shortWord reports whether a word behind 'device' may be a name of letters.
func shortWord(t string) bool { return len(t) <= 20 && len(t) > 1 && unicode.IsUpper([]rune(t)[0]) }

// looksNamed reports whether a word alone looks like the name of a device: a
// single capital, a whole number, or letters in front of digits. Quantities like
// 3.3V and 25C do not.
func looksNamed(t string) bool {
	r := []rune(t)
	if len(r) == 1 {
		return unicode.IsUpper(r[0]) && r[0] != 'I' || unicode.IsDigit(r[0])
	}
	if len(r) > 24 {
		return false
	}
	digits, letters := 0, 0
	for i, c := range r {
		switch {
		case unicode.IsDigit(c):
			digits++
		case unicode.IsLetter(c):
			letters++
			if i > 0 && digits > 0 && letters == digits { // 3V, 25C
				return false
			}
		case c == '-' || c == '_' || c == '/':
		default:
			return false
		}
	}
	return digits > 0 && (letters == 0 && digits <= 4 || letters > 0 && unicode.IsLetter(r[0]))
}
