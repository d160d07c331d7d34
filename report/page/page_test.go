package page_test

import (
	"bytes"
	"crypto/sha256"
	"encoding/base64"
	"encoding/xml"
	"errors"
	"html"
	"io"
	"math"
	"regexp"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/fit/match"
	"gatesill/report"
	"gatesill/report/internal/invented"
	reportpage "gatesill/report/page"
	"gatesill/store/record"
)

func write(t testing.TB, s report.Sheet) string {
	t.Helper()
	var b bytes.Buffer
	require.NoError(t, reportpage.Write(&b, s))
	return b.String()
}

// words is the text of a page without its markup.
func words(page string) string {
	page = regexp.MustCompile(`(?s)<(style|script)>.*?</(style|script)>`).ReplaceAllString(page, "")
	page = strings.NewReplacer("<sub>", "_", "</sub>", "", "\u00a0", " ", `<span class="nw">`, "", "</span>", "").Replace(page)
	page = regexp.MustCompile(`(?s)<[^>]*>`).ReplaceAllString(page, " ")
	return regexp.MustCompile(`\s+`).ReplaceAllString(html.UnescapeString(page), " ")
}

func TestSameSheetSameBytes(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 60, Points: 20, Seed: 9})
	first := write(t, s)
	for range 5 {
		require.Equal(t, first, write(t, invented.Lot(invented.Options{Devices: 60, Points: 20, Seed: 9})))
	}
	require.NotContains(t, first, time.Now().UTC().Format("2006-01-02"), "the page knows the present day")
}

func TestSummary(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 40, Points: 30, Seed: 5})
	text := words(write(t, s))
	require.Contains(t, text, "Lot 2612 of XR-90 (invented): 40 devices known, 34 with a value, 5 flagged. Sorted by V_GS at the idle current of 250 mA.")
	require.Contains(t, text, "(n = 34)")
	require.Contains(t, text, "1 device never reaches the current and counts as above every value.")
	require.Contains(t, text, "End of the report on lot 2612")
	require.Contains(t, text, s.Hash)
	require.Contains(t, text, "gatesill 0.1.0")
}

// Every device stands in the table, dead and excluded ones too.
func TestEveryDevice(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 40, Points: 30, Seed: 5})
	page := write(t, s)
	table := page[strings.Index(page, `id="device-table"`):]
	table = table[:strings.Index(table, "</table>")]
	for _, d := range s.Devices {
		require.Contains(t, table, "<bdi>"+d.Name+"</bdi>")
	}
	require.Equal(t, 40, strings.Count(table, "<tr data-d="))
	for _, word := range []string{"above", "open", "shorted", "wrong way round", "declined", "excluded", "measured"} {
		require.Contains(t, table, "<td>"+word+"</td>")
	}
}

func TestFlagsInSentencesWithAdvice(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 40, Points: 30, Seed: 5})
	s.Codes = []fit.CodeInfo{
		{Code: fit.CodeOffFamilyGain, Meaning: "The gain is that of another family.", Next: "Compare its marking with the others."},
		{Code: fit.CodeHeatingNotChecked, Meaning: "Heating was not looked for.", Next: "Sweep down as well."},
		{Code: fit.CodeTwoPopulations, Next: "Ask where the parts come from."},
	}
	s.Spread.Populations, s.Spread.Split = 2, &lot.Split{By: fit.KeyVgsth, GapLow: 2.524, GapHigh: 3.009, Low: []string{"C1", "C2"}, High: []string{"C3"}, Text: "a gap of 485 mV parts the lot 8 to 17."}
	text := words(write(t, s))
	for _, v := range s.Spread.Devices {
		for _, r := range v.Reasons {
			require.Contains(t, text, r.Text)
		}
	}
	require.Contains(t, text, "Compare its marking with the others.")
	require.Contains(t, text, "What to do: Sweep down as well.")
	require.Contains(t, text, "Two populations. A gap of 485 mV parts the lot 8 to 17. What to do: Ask where the parts come from.")
	require.Contains(t, text, "Lower group, 2 devices, V_GS(th) up to 2.524 V : C1, C2")
	require.Contains(t, text, "Upper group, 1 device, V_GS(th) from 3.009 V : C3")
	require.Contains(t, text, report.WordsOf(fit.Shorted).Next, "a state that is a flag says what to do without further help")
	require.Contains(t, text, "The current is ten times what its neighbours say.", "points left out are listed with their reason")
}

func TestWhatIsMissingIsSeen(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 10, Points: 1, Spots: true})
	s.Sessions, s.Lot.Supplier, s.Lot.Sampled, s.Hash, s.Version = nil, "", "", "", ""
	text := words(write(t, s))
	for _, want := range []string{
		"supplier not given", "sample taken not given", "for (customer, contact) not given", "released by not given", "issued on not given", "operator not given",
		"Instruments, their accuracy and their calibration not given", "Session, operator and fixture not given", "how the sample was taken: not given",
		"Guard band at a limit: not given", "Checksum of the data (SHA-256): none", "No curves: the devices were read at single currents only.",
	} {
		require.Contains(t, text, want)
	}
}

func TestOverdueMeter(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 10, Points: 10})
	text := words(write(t, s))
	require.Contains(t, text, "The calibration of the current meter (invented handheld, serial A-2) was due on 2026-03-01 and had run out when it was used on 2026-05-04.")
	require.NotContains(t, text, "calibration of the gate meter")
	for i := range s.Devices {
		for j := range s.Devices[i].Sweeps {
			s.Devices[i].Sweeps[j].MeasuredAt = "2026-03-01" // the last good day
		}
	}
	require.NotContains(t, words(write(t, s)), "had run out")
}

func TestUnlikeConditionsAreSaid(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 10, Points: 10})
	require.NotContains(t, words(write(t, s)), "not all taken under one condition")
	s.Devices[3].Sweeps[0].Condition.VDD = record.Known(12)
	text := words(write(t, s))
	require.Contains(t, text, "not all taken under one condition")
	require.Contains(t, text, "V_DD 12 V")
	require.Contains(t, text, "V_DD 28 V")
}

func TestCautionsFollowTheMode(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 10, Points: 10})
	require.Contains(t, words(write(t, s)), "off voltage (0 V for this part) before the drain supply goes on")
	s.Part.Mode, s.Part.OffVoltage = record.Depletion, record.Known(-4)
	text := words(write(t, s))
	require.Contains(t, text, "This part conducts with no gate voltage. Bring the gate to its off voltage of -4 V")
	require.Contains(t, text, "no proof that a part is genuine")
	require.Contains(t, text, "come before anything said here")
}

const hostile = "<script>alert(1)</script>\"'&\x1b[31m\u202e{{.}}</style>*/;@import url(//x)"

func hostileSheet() report.Sheet {
	s := invented.Lot(invented.Options{Devices: 20, Points: 10, Seed: 3})
	h := hostile
	s.Part.Name, s.Lot.Name, s.Lot.Supplier, s.Lot.Sampled, s.Lot.Note, s.Lot.DateCode = h, h, h, h, h, h
	s.Version, s.Hash, s.Latest, s.TestBasis, s.Spread.Estimator = h, h, h, h, h
	s.SortedBy = fit.KeyVgsth
	for i := range s.Devices {
		d := &s.Devices[i]
		d.Name += h
		d.Package, d.Side, d.Result.Why, d.Device.Why = h, h, h, h
		d.Result.Method = h
		d.Result.Warnings = append(d.Result.Warnings, fit.Warning{Code: h, Text: h})
		sw := &d.Sweeps[0]
		sw.MeasuredAt, sw.SourceName, sw.Condition.Ammeter, sw.Condition.TempOf = h, h, h, h
		sw.Condition.Circuit = record.Circuit(h)
		sw.Result.LeftOut = []fit.LeftOut{{Index: 1, Code: h, Text: h}, {Index: 99, Code: h}}
		for j := range sw.Instruments {
			m := &sw.Instruments[j]
			m.Role, m.Name, m.Serial, m.Calibrated, m.Due, m.Coverage = h, h, h, h, h, h
		}
	}
	for i := range s.Spread.Devices {
		v := &s.Spread.Devices[i]
		v.Name += h
		v.Flagged, v.Reasons = true, []lot.Reason{{Code: h, Text: h}}
	}
	for i := range s.Sorting.Bins {
		b := &s.Sorting.Bins[i]
		b.Name = h
		for j := range b.Devices {
			b.Devices[j].Name += h
			b.Devices[j].Maybe = h
		}
	}
	s.Sorting.By = fit.KeyVgsth
	s.Sorting.Warnings = []fit.Warning{{Code: h, Text: h}}
	s.Spread.Split = &lot.Split{Text: h, Low: []string{h}, High: []string{h}}
	s.Codes = []fit.CodeInfo{{Code: h, Meaning: h, Next: h}}
	s.Sources[0].Name, s.Sources[0].Hash, s.Sources[0].Layout, s.Sources[0].ImportedAt = h, h, h, h
	x := &s.Sessions[0]
	x.Name, x.Bench, x.Operator, x.Fixture, x.StartedAt = h, h, h, h, h
	return s
}

func TestHostileNames(t *testing.T) {
	page := write(t, hostileSheet())
	require.Equal(t, 1, strings.Count(page, "<script"), "a text became a script")
	require.Equal(t, 1, strings.Count(page, "</style>"), "a text ended the style sheet")
	for _, bad := range []string{"\x1b", "\u202e", "<script>alert"} {
		require.False(t, strings.Contains(page, bad), "%q stands raw in the page near %q", bad, page[max(0, strings.Index(page, bad)-80):][:100])
	}
	style := page[strings.Index(page, "<style>"):strings.Index(page, "</style>")]
	require.NotContains(t, style, "@import")
	require.Contains(t, page, "&lt;script&gt;alert(1)")
	require.Contains(t, page, `\x1b[31m`)
}

// The policy of the page names exactly the style and the script that are in it,
// and nothing in it points outside.
func TestPolicyAndNothingFetched(t *testing.T) {
	pages := []string{writeSets(t, matchedOf(t, match.Options{By: byBias(0.02)}, hostileSheet())), writeBias(t, biasOf(t, hostileSheet(), trimmed()))}
	for _, s := range []report.Sheet{invented.Lot(invented.Options{Devices: 30, Points: 20}), hostileSheet(), {}} {
		pages = append(pages, write(t, s))
	}
	for _, page := range pages {
		between := func(a, b string) string {
			i := strings.Index(page, a) + len(a)
			return page[i : i+strings.Index(page[i:], b)]
		}
		policy := html.UnescapeString(between(`Content-Security-Policy" content="`, `"`))
		for _, tag := range []string{"style", "script"} {
			sum := sha256.Sum256([]byte(between("<"+tag+">", "</"+tag+">")))
			require.Contains(t, policy, tag+"-src 'sha256-"+base64.StdEncoding.EncodeToString(sum[:])+"'")
		}
		require.True(t, strings.HasPrefix(policy, "default-src 'none';"))
		for _, attr := range regexp.MustCompile(`\s(?:src|href|action|data|poster|srcset)="([^"]*)"`).FindAllStringSubmatch(page, -1) {
			require.Regexp(t, `^(#|data:,$)`, attr[1])
		}
		require.NotContains(t, page, " style=", "a style attribute, which the policy forbids")
	}
}

func TestPicturesAreWellFormed(t *testing.T) {
	for _, s := range []report.Sheet{invented.Lot(invented.Options{Devices: 30, Points: 20}), hostileSheet()} {
		page := write(t, s)
		pictures := regexp.MustCompile(`(?s)<svg .*?</svg>`).FindAllString(page, -1)
		require.Len(t, pictures, 4)
		ids := map[string]bool{}
		for _, p := range pictures {
			d := xml.NewDecoder(strings.NewReader(p))
			for {
				tok, err := d.Token()
				if errors.Is(err, io.EOF) {
					break
				}
				require.NoError(t, err)
				if e, ok := tok.(xml.StartElement); ok {
					for _, a := range e.Attr {
						if a.Name.Local == "id" {
							require.False(t, ids[a.Value], "id %s twice", a.Value)
							ids[a.Value] = true
						}
					}
				}
			}
		}
	}
}

func TestHeadingsInOrder(t *testing.T) {
	for _, s := range []report.Sheet{invented.Lot(invented.Options{Devices: 30, Points: 20}), {}} {
		last := 0
		for _, m := range regexp.MustCompile(`<h([1-6])`).FindAllStringSubmatch(write(t, s), -1) {
			level := int(m[1][0] - '0')
			require.LessOrEqual(t, level, last+1, "a level is left out")
			require.False(t, level == 1 && last > 0, "a second h1")
			last = level
		}
	}
}

func TestNoNumberIsShownThatIsNone(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 10})
	for i := range s.Devices {
		s.Devices[i].Result.Vt = fit.Quantity{Value: 3, U: math.NaN(), UBetween: math.Inf(1), UAbsolute: math.NaN(), N: 1}
	}
	s.Spread.Summary[fit.KeyVt] = lot.Summary{N: 1, Mean: math.NaN(), SD: math.NaN(), Median: math.NaN(), RobustSD: math.NaN(), Min: math.NaN(), Max: math.Inf(1)}
	s.Spread.Limits[fit.KeyVt] = lot.Limit{K: math.NaN(), Low: math.NaN(), High: math.Inf(1)}
	s.Sorting.SmallestWidth = math.NaN()
	text := words(write(t, s))
	require.NotContains(t, text, "NaN")
	require.NotContains(t, text, "Inf ")
	require.Contains(t, text, "not known")
	require.Contains(t, text, "n/a")
}

// With more curves than a picture can show, every flagged one is drawn and the
// page says what is left out; the table still has every device.
func TestManyDevices(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 1500, Points: 8, Seed: 4})
	page := write(t, s)
	require.Contains(t, words(page), "1000 of 1499 curves are drawn: every flagged one, and of the others an even choice from the lowest to the highest V_GS(idle).")
	linear := page[strings.Index(page, `id="curves-linear"`):strings.Index(page, `id="curves-square-root"`)]
	for _, v := range s.Spread.Devices {
		if v.Flagged {
			require.Contains(t, linear, "<title>"+v.Name+" (flagged: ")
		}
	}
	require.Equal(t, 1500, strings.Count(page, "<tr data-d="))
}

// Where no ammeter was read the curve comes from the voltage across R_L.
func TestCurvesFromTheLoadVoltage(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 9, Points: 20, Clean: true})
	whole := write(t, s)
	for i := range s.Devices {
		c := &s.Devices[i].Sweeps[0].Curve
		c.Vl = make([]float64, len(c.Id))
		for k := range c.Id {
			c.Vl[k] = 10 * c.Id[k]
		}
		c.Id = nil
	}
	require.Equal(t, regexp.MustCompile(` d="M[^"]*"`).FindAllString(whole, -1), regexp.MustCompile(` d="M[^"]*"`).FindAllString(write(t, s), -1))
}

func BenchmarkPage5000(b *testing.B) {
	s := invented.Lot(invented.Options{Devices: 5000, Points: 30, Seed: 2})
	var buf bytes.Buffer
	for b.Loop() {
		buf.Reset()
		if err := reportpage.Write(&buf, s); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(buf.Len()), "bytes")
}

// The page names the devices whose sweeps disagree, with what was found.
func TestSweepsThatDisagreeAreNamed(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 10, Seed: 1})
	require.NotContains(t, words(write(t, s)), "Sweeps disagree")
	r := &s.Devices[2].Result
	r.Warnings = append(r.Warnings, fit.Warning{Code: fit.CodeSweepsDisagree, Text: "V_GS(th) of its sweeps differs by 60 mV"})
	require.Regexp(t, `Sweeps disagree .*D03 : V_GS\(th\) of its sweeps differs by 60 mV\. \(sweeps-disagree\)`, words(write(t, s)))
}

// A sentence that begins with the two populations is not headed by them again,
// and several quantities with too few devices are one note.
func TestNotesAreSaidOnce(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 10, Seed: 1})
	s.Spread.Populations, s.Spread.Split = 2, &lot.Split{By: fit.KeyVgsth, GapLow: 2.5, GapHigh: 3, Low: []string{"C1"}, High: []string{"C2"}, Text: "two populations by V_GS(th): 1 and 1"}
	s.Spread.Warnings = []fit.Warning{{Code: fit.CodeTwoPopulations, Text: s.Spread.Split.Text}, {Code: fit.CodeTwoPopulations, Text: "neither group is the odd one"}}
	for _, name := range []string{"V_GS(th)", "gain factor"} {
		s.Spread.Warnings = append(s.Spread.Warnings, fit.Warning{Code: fit.CodeNTooSmall, Text: "too few to judge one another by " + name + ": 6 devices have a value"})
	}
	text := words(write(t, s))
	require.Contains(t, text, "Note. Two populations by V_GS(th): 1 and 1.")
	require.NotContains(t, text, "Two populations. Two populations")
	require.Contains(t, text, "Note. Neither group is the odd one.")
	require.Contains(t, text, "Note. Too few to judge one another by V_GS(th) and gain factor: 6 devices have a value.")
	require.Equal(t, 1, strings.Count(text, "Too few to judge"))
}

// Long lists of names show their first and keep the others in a fold; nothing
// is lost.
func TestLongListsFold(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 200, Points: 6, Seed: 2})
	var all []lot.Placed
	for _, b := range s.Sorting.Bins {
		all = append(all, b.Devices...)
	}
	require.Greater(t, len(all), 150)
	s.Sorting.Bins = []lot.Bin{{Name: "A", Low: 2, High: 4, Devices: all}, {Name: "B", Low: 4, High: 4.5}, {Name: "C", Low: 4.5, High: 5}}
	page := write(t, s)
	bins := page[strings.Index(page, `<section id="bins"`):]
	bins = bins[:strings.Index(bins, "</section>")]
	require.Equal(t, 1, strings.Count(bins, `<details class="more">`))
	text := words(bins)
	for _, d := range all {
		require.Contains(t, text, d.Name)
	}
	require.Regexp(t, `and \d+ more`, text)
	require.Contains(t, text, "B to C 4.00 5.00 none none")

	few := words(write(t, invented.Lot(invented.Options{Devices: 20, Points: 6, Seed: 2})))
	require.NotRegexp(t, `and \d+ more`, few)
}

// Devices in no bin for the same reason stand together.
func TestInNoBinByReason(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 20, Points: 6, Seed: 2})
	for i := range s.Sorting.Unsorted[:3] {
		s.Sorting.Unsorted[i].Why = "outside the edges given"
	}
	require.Contains(t, words(write(t, s)), "D05, D06, D07 : Outside the edges given.")
}

// Where the absolute uncertainty is known it stands beside that of the session.
func TestAbsoluteUncertaintyBesideTheOther(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 10, Points: 10, Seed: 1})
	s.Devices[0].Result.VgsIdle = fit.Quantity{Value: 3.25, U: 0.0005, UBetween: math.NaN(), UAbsolute: 0.009, N: 4}
	require.Regexp(t, `D01 3\.25000 ± 0\.00050 ± 0\.0090 4 `, words(write(t, s)))
	require.Contains(t, words(write(t, s)), "± abs. is one standard uncertainty")
	for i := range s.Devices {
		for _, key := range fit.Keys {
			s.Devices[i].Result.At(key).UAbsolute = math.NaN()
		}
	}
	without := words(write(t, s))
	require.Regexp(t, `D01 3\.25000 ± 0\.00050 4 `, without)
	require.NotContains(t, without, "± abs.")
}
