package page_test

import (
	"bytes"
	"encoding/xml"
	"errors"
	"io"
	"math"
	"regexp"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"gatesill/fit"
	"gatesill/fit/compare"
	"gatesill/fit/lot"
	"gatesill/report"
	"gatesill/report/internal/invented"
	reportpage "gatesill/report/page"
	"gatesill/store/record"
)

// compared is an invented lot with its comparison.
func compared(ref, cand invented.Options, a invented.Against) report.Sheet {
	if ref.Lot == "" {
		ref.Lot = "2611"
	}
	s := invented.Lot(cand)
	c := invented.Compared(invented.Lot(ref), s, a)
	s.Compared = &c
	return s
}

var two = [2]invented.Options{{Devices: 40, Points: 20, Seed: 5}, {Devices: 36, Points: 20, Seed: 6, Shift: 0.012}}

// section is the part of a page on the comparison.
func section(t *testing.T, page string) string {
	t.Helper()
	i := strings.Index(page, `<section id="compared"`)
	require.GreaterOrEqual(t, i, 0, "no comparison on the page")
	return page[i : i+strings.Index(page[i:], "</section>")]
}

func TestNoComparisonNoSection(t *testing.T) {
	page := write(t, invented.Lot(two[0]))
	for _, id := range []string{"compared", "trend"} {
		require.NotContains(t, page, `id="`+id+`"`)
		require.NotContains(t, page, `href="#`+id+`"`)
	}
}

// Each verdict has its word and its shape, and stands in the summary as well.
func TestVerdictInWordAndShape(t *testing.T) {
	for verdict, want := range map[compare.Verdict][2]string{
		compare.InsideMargin: {"✓", "Inside the margin"}, compare.OutsideMargin: {"✕", "Outside the margin"}, compare.Differs: {"≠", "The lots differ"},
		compare.NoDifference: {"○", "No difference seen"}, compare.TooFew: {"?", "Too few to tell"}, "not invented yet": {"?", "Not invented yet."},
	} {
		s := compared(two[0], two[1], invented.Against{Margin: 0.05})
		s.Compared.Verdict = verdict
		page := write(t, s)
		require.Contains(t, words(section(t, page)), "Compared with lot 2611 "+want[0]+" "+want[1])
		require.Contains(t, words(page), "Compared with lot 2611: "+string(verdict)+", shift ")
	}
}

// Every number is there with its n, and every sentence of the comparison.
func TestComparisonIsTold(t *testing.T) {
	s := compared(two[0], two[1], invented.Against{Margin: 0.05, Paired: true})
	c := &s.Compared.Comparison
	c.Shift, c.Low, c.High, c.MarginLow, c.MarginHigh, c.NotExcluded, c.Raw, c.ForTemp = 0.0123, 0.0041, 0.0205, 0.0055, 0.0191, 0.0205, 0.0143, 0.004
	s.Compared.MarginFrom = "20 % of the idle current, stored with lot 2611 on 2026-05-02"
	c.Paired.Own = compare.Interval{Value: 0.0143, Low: 0.0103, High: 0.0183}
	c.DF, c.P, c.Centre = 52.3, 0.0031, [2]float64{3.384, 3.3963}
	c.Counts = [2]compare.Counts{{N: 38, WithValue: 35, Above: 2, Without: 1, Flagged: 4, Aside: 3, Control: 6}, {N: 31, WithValue: 30, Above: 1, Flagged: 5, Aside: 7, Control: 8}}
	c.More, c.MoreText = 120, "it takes the spread of these lots for that of the next"
	text := words(section(t, write(t, s)))
	for _, want := range []string{
		report.Sentence(s.Compared.Reason()), "+12.3 mV, 95 % interval +4.1 to +20.5 mV (n = 35 of the reference, 30 of this lot). By invented test on means, 52.3 degrees of freedom, p = 0.0031.",
		"+14.3 mV, before -2.0 mV was taken off for the control parts and +4.0 mV was taken off for the temperatures of the lots.",
		"± 50 mV, before the first reading of this lot: the largest shift that does not matter. 20 % of the idle current, stored with lot 2611 on 2026-05-02.",
		"Here it is +5.5 to +19.1 mV.", "called inside it in about 5 of 100 comparisons",
		"The largest shift that these devices do not exclude is 20.5 mV (95 % interval; n = 35 of the reference, 30 of this lot). About 120 devices of each lot would tell. It takes the spread of these lots for that of the next.",
		"gatesill plan shift", "400 µV (standard uncertainty of the shift, in the interval). Basis: control parts. 2 control parts tie both lots together; -2.00 ± 0.40 mV was taken off the shift for them.",
		"of the reference (95 % interval", "invented test on spreads", "gain at equal threshold At equal threshold no difference of the gain factor is seen: +1.2 %, 95 % interval -0.4 to +2.8 %. By the gain factor, n = 34 and 30, adjusted by the common slope of gain on threshold, p = 0.14.",
		"By serial, 30 pairs. 34 serials stand in both lots and their values go together. The pairs alone, with nothing taken off and without the error common to a lot: +14.3 mV, 95 % interval +10.3 to +18.3 mV. The differences scatter by 1.1 mV (1 sd, n = 30).",
		"with a value (n) 35 30", "above: never reach the current 2 1", "with neither 1 0", "flagged: counted, never left out for that 4 5", "excluded 3 7", "control parts, in no statistic 6 8",
		"centre (trimmed mean), as read 3.384 V (n = 35) 3.396 V (n = 30)", "parts in the lot 160 144", "how the sample was taken every fourth part of the tubes, in tube order every fourth",
		"invented test on ranks +12.1 mV (+3.1 to +21.2 mV) 412", "invented test on whole distributions 0.31 n/a n/a", "They decide nothing", "take it as it is With the old network", "send back No rule of yours is broken. outside-margin: not met.", "re-adjust The trimmers move by 15 mV at the centre. none stored",
		"Only in the reference, 1 device : D39", "Only in this lot, 2 devices : X1, X2", "Heating was not checked in either lot.", "Populations Reference: one. This lot: one.",
		s.Compared.Reference.Hash, "fitted by gatesill 0.1.0", "Conditions of both lots", "reference load: drain fed through R_L from V_DD", "Instruments of the reference",
	} {
		require.True(t, strings.Contains(strings.ToLower(text), strings.ToLower(want)), "%q is not in %s", want, text)
	}
	require.NotContains(t, text, "NaN")
}

// A margin set after the readings is said to be one in plain words, in the
// decision and as a note; without a margin nothing is held against one.
func TestWhenTheMarginWasSet(t *testing.T) {
	after := words(section(t, write(t, compared(two[0], two[1], invented.Against{Margin: 0.05, After: true}))))
	require.Contains(t, after, "after readings of this lot were known: the largest shift")
	require.Contains(t, after, "Note. The margin was set after readings of this lot were known.")
	before := words(section(t, write(t, compared(two[0], two[1], invented.Against{Margin: 0.05}))))
	require.NotContains(t, before, "after readings")
	require.Contains(t, before, "± 50 mV, set 2026-05-02 08:00:00 UTC, before the first reading of this lot: the largest shift that does not matter.")
	// A margin other than the stored one was given for this comparison: the time of
	// the stored one is not its time.
	other := words(section(t, write(t, compared(two[0], two[1], invented.Against{Margin: 0.07}))))
	require.Contains(t, other, "± 70 mV, before the first reading")
	none := words(section(t, write(t, compared(two[0], two[1], invented.Against{}))))
	require.Contains(t, none, "None is set: whether the lots differ can be said")
	require.Contains(t, none, "interval of the shift leaves 0 out")
	require.NotContains(t, none, "90 % interval")
	require.NotContains(t, none, "not on these lines")
}

// The devices in both lots stand in a list with their differences.
func TestPairsAreListed(t *testing.T) {
	s := compared(two[0], two[1], invented.Against{Paired: true})
	ref := s.Compared.Reference
	for i := range ref.Devices {
		ref.Devices[i].Name = "other" + ref.Devices[i].Name
	}
	ref.Devices[0].Name, ref.Devices[0].Result.VgsIdle = "D01", fit.Quantity{Value: 3.25, U: 0.001, N: 4}
	s.Devices[0].Result.VgsIdle = fit.Quantity{Value: 3.2625, U: 0.001, N: 4}
	ref.Devices[1].Name, ref.Devices[1].Role = "D02", record.Control
	page := section(t, write(t, s))
	require.Contains(t, words(page), "D01 3.2500 3.2625 +12.5 This lot less the reference, as measured (n = 1).")
	require.NotContains(t, page, "one by one")
	require.Contains(t, words(page), "not on these lines")

	many := compared(invented.Options{Devices: 200, Points: 6, Seed: 5}, invented.Options{Devices: 200, Points: 6, Seed: 6}, invented.Against{Paired: true})
	require.Contains(t, section(t, write(t, many)), "The devices in both lots, one by one")
}

// Without curves, without values, without a reference sheet, with numbers that
// are none: the page says so and shows no NaN.
func TestComparisonOfLittle(t *testing.T) {
	spots := compared(invented.Options{Devices: 5, Points: 1, Spots: true, Seed: 1}, invented.Options{Devices: 6, Points: 1, Spots: true, Seed: 2}, invented.Against{TooFew: true})
	text := words(section(t, write(t, spots)))
	require.Contains(t, text, "No curves of both lots to lay over each other.")
	require.Contains(t, text, "None could be had (n = 5 of the reference, 6 of this lot).")
	require.Contains(t, text, "shift of this lot n/a")

	bare := invented.Lot(two[0])
	bare.Compared = &report.Compared{}
	require.NotContains(t, words(section(t, write(t, bare))), "NaN")

	odd := compared(two[0], two[1], invented.Against{Margin: 0.05, Paired: true})
	for _, x := range []float64{math.NaN(), math.Inf(1), math.Inf(-1)} {
		c := &odd.Compared.Comparison
		c.Shift, c.Low, c.High, c.Level, c.DF, c.P, c.MarginLow, c.MarginHigh, c.NotExcluded, c.Raw = x, x, x, x, x, x, x, x, x, x
		c.Spread, c.Common = compare.Interval{Value: x, Low: x, High: x}, compare.Common{U: x, Offset: x, OffsetU: x, Controls: 1}
		c.Centre, c.SD = [2]float64{x, x}, [2]float64{x, x}
		c.Gain.Percent, c.Gain.P, c.Paired.SD = compare.Interval{Value: 1, Low: x, High: x}, x, x
		for i := range c.Curves.Points {
			c.Curves.Points[i].Low, c.Curves.Points[i].High = x, x
		}
		c.Curves.Level, c.Curves.Critical = x, x
		odd.Trend = invented.Trend(3)
		odd.Trend.Low, odd.Trend.High, odd.Trend.Lots[0].Centre, odd.Trend.Pairs[0].P, odd.Trend.Pairs[0].Low = x, x, x, x, x
		text := words(write(t, odd))
		require.NotContains(t, text, "NaN")
		require.NotContains(t, text, "Inf")
		odd.Compared.Gain.Text = ""
	}
}

// The column of rules is there when there is a rule.
func TestRulesOfOptions(t *testing.T) {
	s := compared(two[0], two[1], invented.Against{})
	require.Contains(t, words(section(t, write(t, s))), "what follows your stored rule")
	for i := range s.Compared.Options {
		s.Compared.Options[i].Rule = ""
	}
	without := words(section(t, write(t, s)))
	require.NotContains(t, without, "your stored rule")
	require.Contains(t, without, "No rule of yours is stored for any of them.")
}

// A p-channel lot: what a shift below 0 means is said, and 'above' lies at the
// left.
func TestComparisonOfPChannel(t *testing.T) {
	ref, cand := two[0], two[1]
	ref.PChannel, cand.PChannel = true, true
	page := section(t, write(t, compared(ref, cand, invented.Against{Margin: 0.05})))
	require.Contains(t, words(page), "a shift below 0 means that this lot needs more of it")
	require.Contains(t, page, "share of devices at or above")
	table := words(page[strings.Index(page, "Gate voltage that a share"):])
	require.Regexp(t, `the first device -2\.\d+ -2\.\d+ .* 50 % -3\.\d+ -3\.\d+ .*100 % above above`, table)
}

// Two populations of either lot are told with it.
func TestPopulationsOfBothLots(t *testing.T) {
	s := compared(two[0], two[1], invented.Against{})
	s.Compared.Reference.Spread.Populations, s.Compared.Reference.Spread.Split = 2, &lot.Split{By: fit.KeyVgsth, Text: "a gap of 485 mV parts the lot 8 to 17."}
	require.Contains(t, words(section(t, write(t, s))), "Reference: two; a gap of 485 mV parts the lot 8 to 17. This lot: one.")
}

// Which test counts, the words of a stored rule, readings of the same devices that are
// no lots, and a warning that stands with the result already.
func TestWhatTheComparisonSays(t *testing.T) {
	s := compared(two[0], two[1], invented.Against{})
	c := s.Compared
	c.Verdict, c.Paired = compare.Differs, nil
	c.Beside = "beside it no test sees a difference"
	c.Options = []compare.Option{{Name: compare.SendBack, Text: "kept", Rule: compare.ByLimits}}
	s.Spread.Populations, s.Spread.Split = 2, &lot.Split{By: fit.KeyVgsth, Text: "two populations by a gap of 485 mV"}
	c.Warnings = []fit.Warning{{Code: fit.CodeTwoPopulations, Text: "lot " + c.Candidate + ": two populations by a gap of 485 mV"}}
	page := write(t, s)
	text := words(section(t, page))
	require.Contains(t, text, "≠ The lots differ")
	require.Contains(t, text, "Beside it no test sees a difference.")
	require.Contains(t, text, "A device outside the data-sheet limits.")
	require.NotContains(t, text, "outside-limits")
	require.Contains(t, text, "This lot: two, see the result.")
	require.NotContains(t, text, "485")
	require.Contains(t, words(page), "Two populations by a gap of 485 mV")
	c.Paired = &compare.Paired{Pairs: 12, Why: "asked for"}
	text = words(section(t, write(t, s)))
	require.Contains(t, text, "≠ The readings differ")
}

func TestRunOfLots(t *testing.T) {
	s := invented.Lot(two[0])
	s.Trend = invented.Trend(13)
	page := write(t, s)
	text := words(page)
	require.Contains(t, page, `href="#trend"`)
	require.Contains(t, text, "2612: 3.4700 ± 0.0060 V, n = 32, 2026-01-04 (this lot) (outside the control limits)")
	require.Contains(t, text, "Fewer than 20 lots: the limits are provisional.")
	require.Contains(t, text, "2600, 2612 50 20 to 80 4.0e-04 0.002")
	run := page[strings.Index(page, `<section id="trend"`):]
	run = run[:strings.Index(run, "</section>")]
	lots, folded := strings.Index(run, "The run of lots"), strings.Index(run, "<details")
	require.True(t, 0 < lots && lots < folded && folded < strings.Index(run, "Lot against lot"), "the table of lots is open, that of pairs folded")
	require.Equal(t, 1, strings.Count(run, "<details"))
	require.NotContains(t, text, "the order of the lots is not that of their making")
	s.Trend.Untimed = true
	require.Contains(t, words(write(t, s)), "the order of the lots is not that of their making")
}

func hostileCompared() report.Sheet {
	h := hostile
	s := hostileSheet()
	ref := hostileSheet()
	c := invented.Compared(invented.Lot(two[0]), invented.Lot(two[1]), invented.Against{Margin: 0.05, Paired: true})
	c.Reference, c.Comparison.Reference, c.Comparison.Candidate = &ref, h, h
	c.Quantity, c.Test, c.Sentence, c.MoreText, c.SpreadTest, c.Common.Basis, c.Curves.Text, c.Gain.Text, c.Paired.Why = fit.KeyVgsth, h, h, h, h, h, h, h, h
	c.Verdict, c.MarginSet = compare.Verdict(h), h
	c.Paired.OnlyRef, c.Paired.OnlyNew = []string{h}, []string{h}
	c.Secondary[0].Test = h
	c.Options = []compare.Option{{Name: h, Text: h, Rule: h}}
	c.Warnings = []fit.Warning{{Code: h, Text: h}}
	s.Compared = &c
	s.Trend = invented.Trend(4)
	s.Trend.Text = []string{h}
	for i := range s.Trend.Lots {
		l := &s.Trend.Lots[i]
		l.Name, l.At, l.DateCode = h, h, h
	}
	s.Trend.Pairs[0].A = h
	return s
}

func TestHostileComparison(t *testing.T) {
	page := write(t, hostileCompared())
	require.Equal(t, 1, strings.Count(page, "<script"), "a text became a script")
	require.Equal(t, 1, strings.Count(page, "</style>"), "a text ended the style sheet")
	for _, bad := range []string{"\x1b", "\u202e", "<script>alert"} {
		require.False(t, strings.Contains(page, bad), "%q stands raw in the page near %q", bad, page[max(0, strings.Index(page, bad)-80):][:100])
	}
}

// Pictures are well-formed, their ids are their own, and the page with them
// keeps its promises: nothing fetched, no style attribute, headings in order.
func TestComparisonKeepsThePage(t *testing.T) {
	for _, s := range []report.Sheet{compared(two[0], two[1], invented.Against{Margin: 0.05}), hostileCompared()} {
		s.Trend = invented.Trend(5)
		page := write(t, s)
		pictures := regexp.MustCompile(`(?s)<svg .*?</svg>`).FindAllString(page, -1)
		require.Len(t, pictures, 10)
		for _, p := range pictures {
			d := xml.NewDecoder(strings.NewReader(p))
			for {
				if _, err := d.Token(); errors.Is(err, io.EOF) {
					break
				} else if err != nil {
					require.NoError(t, err)
				}
			}
			require.Contains(t, p, "<title id=")
			require.Contains(t, p, "<desc id=")
		}
		ids := map[string]bool{}
		for _, m := range regexp.MustCompile(` id="([^"]*)"`).FindAllStringSubmatch(page, -1) {
			require.False(t, ids[m[1]], "id %s twice", m[1])
			ids[m[1]] = true
		}
		require.NotContains(t, page, " style=")
		last := 0
		for _, m := range regexp.MustCompile(`<h([1-6])`).FindAllStringSubmatch(page, -1) {
			level := int(m[1][0] - '0')
			require.LessOrEqual(t, level, last+1, "a level is left out")
			last = level
		}
	}
}

func TestSameComparisonSameBytes(t *testing.T) {
	make := func() string {
		s := compared(two[0], two[1], invented.Against{Margin: 0.05, Paired: true})
		s.Trend = invented.Trend(5)
		return write(t, s)
	}
	first := make()
	for range 3 {
		require.Equal(t, first, make())
	}
	require.NotContains(t, first, time.Now().UTC().Format("2006-01-02"), "the page knows the present day")
}

// Two lots of thousands of devices: what the comparison adds to the page is bounded by
// its pictures, not by its devices.
func TestComparisonOfManyStaysSmall(t *testing.T) {
	if testing.Short() {
		t.Skip("3,000 devices are left out of a short run")
	}
	o := invented.Options{Devices: 3000, Points: 5, Seed: 5}
	n := o
	n.Seed, n.Shift = 6, 0.012
	size := len(section(t, write(t, compared(o, n, invented.Against{Margin: 0.05}))))
	t.Logf("%d bytes", size)
	require.Less(t, size, 150_000)
}

func BenchmarkCompared5000(b *testing.B) {
	o := invented.Options{Devices: 5000, Points: 30, Seed: 5}
	n := o
	n.Seed, n.Shift = 6, 0.012
	s := compared(o, n, invented.Against{Margin: 0.05})
	alone := s
	alone.Compared = nil
	for name, s := range map[string]report.Sheet{"compared": s, "alone": alone} {
		b.Run(name, func(b *testing.B) {
			var buf bytes.Buffer
			for b.Loop() {
				buf.Reset()
				if err := reportpage.Write(&buf, s); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(buf.Len()), "bytes")
		})
	}
}
