package table

import (
	"slices"
	"strings"
	"unicode/utf8"
)

// summaryLeast is how many rows of one name make it a device, whatever its name.
const summaryLeast = 3

const maxSummaries = 100 // refused summary rows that are kept

const summaryReason = "it looks like a summary row of a spreadsheet"

// summaryWords are what spreadsheets write beside the figures below a list,
// folded (from memory, common practice).
var summaryWords = func() map[string]bool {
	m := map[string]bool{}
	for _, w := range strings.Fields(`mittelwert mittel durchschnitt minimum maximum min max summe median standardabweichung stdabw stabw stdabweichung varianz anzahl
		spannweite streuung gesamt mean average avg sum total std stdev stddev standarddeviation sd sigma variance var range count n
		moyenne ecarttype somme mediane promedio media mediana desviacionestandar desvest suma minimo maximo moda deviazionestandard devst somma
		gemiddelde som aantal standaardafwijking stdevp stdevs srednia suma odchyleniestandardowe prumer keskiarvo medel medelvarde snitt`) {
		m[w] = true
	}
	return m
}()

// isSummaryWord reports whether a device cell is nothing but such a word.
func isSummaryWord(s string) bool {
	if len(s) > 40 || strings.ContainsAny(s, "0123456789") {
		return false
	}
	return summaryWords[fold(s)]
}

// dropSummaries refuses the rows of a list whose device cell is a summary word,
// where other rows have other names. A word that stands on [summaryLeast] rows
// or more is a device, and so is the letter n among devices named by letters.
func (r *reader) dropSummaries(list []*builder) []*builder {
	if r.layout == layoutWide || r.first(string(RoleDevice)) == nil {
		return list
	}
	rows := map[string]int{} // by word
	others, letters := 0, false
	for _, b := range list {
		switch {
		case b.len() == 0 || b.bad != "":
		case isSummaryWord(b.device):
			rows[fold(b.device)] += len(b.cols[0].values)
		default:
			others++
			letters = letters || utf8.RuneCountInString(b.device) == 1 && fold(b.device) > "9"
		}
	}
	for _, s := range r.summaries {
		rows[fold(s.text)]++
	}
	if others == 0 || len(rows) == 0 {
		return list
	}
	isSummary := func(name string) bool {
		f := fold(name)
		return isSummaryWord(name) && rows[f] < summaryLeast && !(f == "n" && letters)
	}
	refused := map[int]bool{} // lines
	last := 0                 // line of the last row that is kept
	var kept []*builder
	for _, b := range list {
		if b.len() == 0 || b.bad != "" || !isSummary(b.device) {
			for _, l := range b.lines {
				last = max(last, l.Line+l.Count-1)
			}
			kept = append(kept, b)
			continue
		}
		for _, l := range b.lines {
			for i := range l.Count {
				refused[l.Line+i] = true
			}
		}
		r.file.States -= b.states
	}
	r.refuseLines(refused)
	for line := range refused {
		if line > last {
			r.footer++
		}
	}
	for _, s := range r.summaries { // refused already, for what else is wrong
		if s.line > last && isSummary(s.text) {
			r.footer++
		}
	}
	return kept
}

// refuseLines refuses rows that were read before it was known what they are.
// The refusals are kept in the order of the file.
func (r *reader) refuseLines(lines map[int]bool) {
	w := &rows{splitter: r.bodySplitter(), r: r}
	held := r.file.Refusals
	r.file.Refusals = nil
	for left := len(lines); left > 0 && w.splitter.next(); {
		if len(w.row) <= maxLine && !r.marks.is(w.row) {
			w.split()
		}
		if lines[w.at] {
			w.refuse(summaryReason)
			left--
		}
	}
	held = append(held, r.file.Refusals...)
	slices.SortStableFunc(held, func(a, b Refusal) int { return a.Line - b.Line })
	r.file.Refusals = held[:min(len(held), keptRows)]
}
