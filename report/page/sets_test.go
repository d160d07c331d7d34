package page_test

import (
	"bytes"
	"context"
	"fmt"
	"math"
	"regexp"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"gatesill/fit"
	"gatesill/fit/match"
	"gatesill/report"
	"gatesill/report/internal/invented"
	reportpage "gatesill/report/page"
	"gatesill/store/record"
)

var nan = math.NaN()

func byBias(within float64) []match.Criterion {
	return []match.Criterion{{Key: fit.KeyVgsIdle, Within: within}}
}

// matchedOf matches the devices of invented lots in earnest.
func matchedOf(t testing.TB, o match.Options, lots ...report.Sheet) report.Matched {
	t.Helper()
	m := report.Matched{Gm: nan, Vds: o.Vds, SourceOhms: o.SourceResistor}
	if m.Vds == 0 {
		m.Vds = nan
	}
	for i := range lots {
		s := &lots[i]
		m.Sheets = append(m.Sheets, s)
		for j := range s.Devices {
			d := &s.Devices[j]
			one := match.Member{Name: d.Name, Lot: s.Lot.Name, PChannel: s.Part.Channel == record.PChannel, Result: d.Result}
			if d.State() == fit.Excluded {
				one.Out = "excluded"
			}
			m.Members = append(m.Members, one)
		}
	}
	o.At, o.TestCurrent = 0.25, 1e-3
	found, err := match.Match(context.Background(), m.Members, o)
	require.NoError(t, err)
	m.Matching = *found
	return m
}

func writeSets(t testing.TB, m report.Matched) string {
	t.Helper()
	var b bytes.Buffer
	require.NoError(t, reportpage.WriteSets(&b, m))
	return b.String()
}

// labelled gives the labels of a page: device, gate bias, set.
func labelled(page string) (rows [][3]string) {
	for _, m := range regexp.MustCompile(`<li><bdi class="tagname">(.*?)</bdi> <span>(.*?)</span> <b><bdi>(.*?)</bdi></b></li>`).FindAllStringSubmatch(page, -1) {
		rows = append(rows, [3]string{m[1], m[2], m[3]})
	}
	return rows
}

func TestSetsPage(t *testing.T) {
	m := matchedOf(t, match.Options{By: byBias(0.01), Vds: 28}, invented.Lot(two[0]))
	require.Greater(t, len(m.Sets), 5)
	page := writeSets(t, m)
	require.Equal(t, page, writeSets(t, m), "not the same bytes")
	text := words(page)
	require.Contains(t, text, m.BoundLine())
	require.Contains(t, text, m.ToleranceLine())
	require.Contains(t, text, fmt.Sprintf("%d pairs, of %d devices", len(m.Sets), m.Offered))
	table := page[strings.Index(page, "The sets, the best first"):]
	table = table[:strings.Index(table, "</table>")]
	require.Equal(t, len(m.Sets), strings.Count(table, `<th scope="row">`))
	for _, s := range m.Sets {
		for _, d := range s.Devices {
			require.Contains(t, table, "<bdi>"+d.Name+"</bdi>")
		}
	}
	// Every device that is not in a set is named with the reason.
	free, out := m.LeftNames()
	for _, g := range append(free, out...) {
		require.Contains(t, text, report.Sentence(g.Text))
		for _, n := range g.Names {
			require.Contains(t, text, n)
		}
	}
	// A label a device of a set, with the set that it is in.
	rows := labelled(page)
	require.Len(t, rows, 2*len(m.Sets))
	require.Equal(t, m.Sets[0].Devices[0].Name, rows[0][0])
	require.Equal(t, "set 1", rows[1][2])
	require.Regexp(t, `^3\.\d{4}\x{a0}V$`, rows[0][1])
	// The trade-off has the chosen tolerance and stands in numbers as well.
	require.Contains(t, text, "chosen: 10 mV")
	require.Contains(t, text, "Sets by tolerance")
	require.NotContains(t, text, "NaN")
}

// Sets that were stored carry their names.
func TestStoredSetsHaveTheirNames(t *testing.T) {
	m := matchedOf(t, match.Options{By: byBias(0.01)}, invented.Lot(two[0]))
	m.Locked = map[int]record.Set{2: {Name: "S7"}}
	rows := labelled(writeSets(t, m))
	require.Equal(t, []string{"set 1", "S7", "set 3"}, []string{rows[1][2], rows[2][2], rows[4][2]})
}

// Of many sets the curves of the worst twelve are drawn, and that is said.
func TestCurvesOfTheWorst(t *testing.T) {
	m := matchedOf(t, match.Options{By: byBias(0.03)}, invented.Lot(invented.Options{Devices: 80, Points: 20, Seed: 5}))
	page := writeSets(t, m)
	require.Greater(t, len(m.Sets), 20)
	require.Contains(t, words(page), fmt.Sprintf("The 12 worst of %d sets with curves are drawn.", len(m.Sets)))
	picture := page[strings.Index(page, `id="sets-apart"`):]
	picture = picture[:strings.Index(picture, "</svg>")]
	require.Equal(t, 24, strings.Count(picture, `class="mate"`))
	require.Contains(t, picture, fmt.Sprintf(">set %d<", len(m.Sets)))
	require.NotContains(t, picture, ">set 1<")
}

// In complementary sets the p-channel devices are hollow, one in each pair.
func TestComplementarySets(t *testing.T) {
	n, p := invented.Lot(invented.Options{Devices: 30, Points: 20, Seed: 5}), invented.Lot(invented.Options{Devices: 30, Points: 20, Seed: 8, PChannel: true, Lot: "2613"})
	m := matchedOf(t, match.Options{By: byBias(0.02)}, n, p)
	require.True(t, m.Complementary)
	page := writeSets(t, m)
	picture := page[strings.Index(page, `id="sets-axis"`):]
	picture = picture[:strings.Index(picture, "</svg>")]
	require.Equal(t, len(m.Sets), strings.Count(picture, `class="mhollow"`))
	require.Equal(t, len(m.Sets), strings.Count(picture, `class="mthis"`))
	require.Contains(t, words(page), "hollow ones p-channel")
	require.Contains(t, words(page), "Lots 2612 and 2613")
	require.Contains(t, words(page), "XR-90 (invented) with XR-90P (invented)")
}

func TestSetsOfPChannel(t *testing.T) {
	m := matchedOf(t, match.Options{By: byBias(0.02), Size: 4}, invented.Lot(invented.Options{Devices: 40, Points: 20, Seed: 5, PChannel: true}))
	page := writeSets(t, m)
	require.NotContains(t, page, "mhollow\"")
	require.Regexp(t, `^-3\.`, labelled(page)[0][1], "the sign of the device")
}

// Without a set, without a curve, without anything.
func TestSetsOfLittle(t *testing.T) {
	none := matchedOf(t, match.Options{By: byBias(1e-6)}, invented.Lot(invented.Options{Devices: 12, Points: 20, Seed: 5}))
	require.Empty(t, none.Sets)
	text := words(writeSets(t, none))
	require.Contains(t, text, "No set: ")
	require.NotContains(t, text, "NaN")

	spots := invented.Lot(invented.Options{Devices: 12, Spots: true, Seed: 5})
	m := report.Matched{Gm: nan, Vds: nan, Sheets: []*report.Sheet{&spots}}
	for i := range spots.Devices {
		m.Members = append(m.Members, match.Member{Name: spots.Devices[i].Name, Lot: "2612", Step: 0.01, Result: spots.Devices[i].Result})
	}
	found, err := match.Match(context.Background(), m.Members, match.Options{By: []match.Criterion{{Key: fit.KeyVgsth, Within: 0.05}}})
	require.NoError(t, err)
	m.Matching = *found
	text = words(writeSets(t, m))
	require.Contains(t, text, "No curves to lay over each other")
	require.Contains(t, text, "not claimed")
	require.NotContains(t, text, "NaN")

	require.Error(t, reportpage.WriteSets(&bytes.Buffer{}, report.Matched{}))
	empty := report.Matched{Sheets: []*report.Sheet{{}}, Matching: match.Matching{Size: 2, By: byBias(0), Worst: nan, Total: nan, At: nan}, Gm: nan, Vds: nan}
	require.NotContains(t, words(writeSets(t, empty)), "NaN")
	odd := none
	odd.Sets = []match.Set{{Number: 1, Spread: nan, Spreads: []float64{nan}, Devices: []match.Placed{{Member: 99, Name: "x", Values: []float64{nan}, U: nan}, {Name: "y"}}, Sharing: match.Sharing{Imbalance: nan, Share: nan, Power: nan, Hottest: -1}}}
	require.NotContains(t, words(writeSets(t, odd)), "NaN")
}

func TestSetsOfHostileNames(t *testing.T) {
	page := writeSets(t, matchedOf(t, match.Options{By: byBias(0.05)}, hostileSheet()))
	require.Equal(t, 1, strings.Count(page, "<script"), "a text became a script")
	require.Equal(t, 1, strings.Count(page, "</style>"), "a text ended the style sheet")
	for _, bad := range []string{"\x1b", "\u202e", "<script>alert"} {
		require.NotContains(t, page, bad)
	}
}

// The page of a large lot stays small: the limit is twice what it was when it was
// written.
func TestSetsOfALargeLotAreSmall(t *testing.T) {
	m := matchedOf(t, match.Options{By: byBias(0.01), NoTradeOff: true}, invented.Lot(invented.Options{Devices: 5000, Points: 2, Seed: 5, Clean: true}))
	start := time.Now()
	page := writeSets(t, m)
	t.Logf("%d sets: %d kB in %v", len(m.Sets), len(page)>>10, time.Since(start))
	require.Less(t, len(page), 2*1100<<10)
	require.Contains(t, words(page), "--labels FILE")
	require.Contains(t, words(page), "the widest are drawn")
}

// Stored sets of a lot stand in its report, released ones are only counted.
func TestStoredSetsInTheReport(t *testing.T) {
	s := invented.Lot(two[0])
	require.NotContains(t, write(t, s), `id="sets"`)
	member := func(name string) record.SetMember { return record.SetMember{Device: name, Lot: "2612"} }
	by := []record.Criterion{{Quantity: string(fit.KeyVgsIdle), Within: record.Known(0.01)}}
	s.Sets = []record.Set{
		{Number: 1, Name: "S1", State: record.Used, Unit: "amplifier 7", At: record.Known(0.25), Spread: record.Known(0.0042), By: by, Members: []record.SetMember{member("D01"), member("D02<b>")}, CreatedAt: "2026-05-05T09:00:00.000Z"},
		{Number: 2, Name: "S2", State: record.Released, Reason: "one failed", Members: []record.SetMember{member("D03"), member("D04")}},
		{Number: 3, Name: "S3", State: record.Reserved, Members: []record.SetMember{member("D05"), {Device: "X1", Lot: "other"}}},
	}
	page := write(t, s)
	text := words(page)
	require.Contains(t, text, "S1 used in amplifier 7 D01, D02<b> 2612 V_GS(idle) within 10 mV 250 mA 4.2 2026-05-05")
	require.Contains(t, text, "S3 reserved 2612/D05, other/X1 2612, other")
	require.Contains(t, text, "Not listed: 1 that were released.")
	require.NotContains(t, page, "D02<b>")
	require.Contains(t, page, `href="#sets"`)
}
