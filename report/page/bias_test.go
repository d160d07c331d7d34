package page_test

import (
	"bytes"
	"fmt"
	"regexp"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"gatesill/fit/bias"
	"gatesill/fit/lot"
	"gatesill/report"
	"gatesill/report/internal/invented"
	reportpage "gatesill/report/page"
	"gatesill/store/record"
)

// trimmed is a divider with a trimmer about the centre of the invented lots.
func trimmed() bias.Options {
	return bias.Options{Beta: nan, Temp: nan, Tempco: bias.NoTempco(), Turns: 10, Network: &bias.Network{Supply: 8, SupplyTol: 0.01, Top: 1600, Bottom: 1200, Trimmer: 100, In: bias.AtGate, Tol: 0.01, TrimTol: 0.1}}
}

// biasOf lays out the bias of an invented lot in earnest.
func biasOf(t testing.TB, s report.Sheet, o bias.Options) report.Bias {
	t.Helper()
	var list []lot.Device
	for i := range s.Devices {
		d := &s.Devices[i]
		list = append(list, lot.Device{Name: d.Name, Control: d.Role == record.Control, Result: d.Result})
	}
	o.Idle = 0.25
	p, err := bias.Of(bias.Lot{Name: s.Lot.Name, PChannel: s.Part.Channel == record.PChannel, Populations: 1, Devices: list}, o)
	require.NoError(t, err)
	return report.Bias{Sheet: &s, Plan: p}
}

func writeBias(t testing.TB, b report.Bias) string {
	t.Helper()
	var out bytes.Buffer
	require.NoError(t, reportpage.WriteBias(&out, b))
	return out.String()
}

func TestBiasPage(t *testing.T) {
	b := biasOf(t, invented.Lot(two[0]), trimmed())
	n := b.Plan.Now
	require.NotEmpty(t, n.Covered.Outside)
	page := writeBias(t, b)
	require.Equal(t, page, writeBias(t, b), "not the same bytes")
	text := words(page)
	// Foremost what is sure on every board, then what the nominal network reaches.
	require.Less(t, n.Always.Count, n.Covered.Count)
	require.Contains(t, text, fmt.Sprintf("%d of %d on every board; %d where all is nominal", n.Always.Count, n.Always.Of, n.Covered.Count))
	for _, f := range b.Facts() {
		if f.Label != "centre" {
			require.Contains(t, text, words(report.Sentence(f.Value)))
		}
	}
	for _, w := range b.Plan.Ways() {
		require.Contains(t, text, w)
	}
	// Every device has its row in the bias sheet.
	sheet := page[strings.Index(page, `id="units"`):]
	for _, u := range b.Plan.Units {
		require.Contains(t, sheet, "<bdi>"+u.Name+"</bdi>")
	}
	require.Equal(t, len(b.Plan.Units), strings.Count(sheet, `<th scope="row">`))
	require.Regexp(t, `D01 3\.\d+ ± 0\.\d+ \d+ %, \d\.\d turns [\d.]+ mA`, words(sheet))
	// Those outside are triangles in the picture, with their names.
	picture := page[strings.Index(page, `id="bias-coverage"`):]
	picture = picture[:strings.Index(picture, "</svg>")]
	marked := regexp.MustCompile(`<title>(\S+) \(outside\)`).FindAllStringSubmatch(picture, -1)
	var names []string
	for _, m := range marked {
		names = append(names, m[1])
	}
	above := regexp.MustCompile(`<title>(\S+) \(never reaches`).FindAllStringSubmatch(picture, -1)
	for _, m := range above {
		names = append(names, m[1])
	}
	require.ElementsMatch(t, n.Covered.Outside, names)
	require.Contains(t, picture, `class="sure"`)
	clean := writeBias(t, biasOf(t, invented.Lot(invented.Options{Devices: 30, Points: 20, Seed: 5, Clean: true}), trimmed()))
	require.Regexp(t, `<title>3\.\d+ V to 3\.\d+ V: 95 % of all parts, 95 % confidence</title>`, clean)
	require.Contains(t, text, "Resistors that bring the gate to the centre")
	require.NotContains(t, text, "NaN")
}

// Devices on one line, cold, warm and without their resistors.
func TestBiasOfALine(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 12, Points: 20, Seed: 5, Clean: true})
	b := biasOf(t, s, bias.Options{Beta: nan, Temp: nan, Tempco: bias.Tempco{Value: -4e-3, Basis: bias.TempcoGiven}})
	var members []bias.Member
	for i := range 3 {
		members = append(members, bias.Member{Name: s.Devices[i].Name, Result: &s.Devices[i].Result})
	}
	l, err := bias.LineOf(members, 0.25, nan, false, bias.LineOptions{Total: 0.75, Source: 0.2, VDS: 10, Rth: 2, Sink: nan, Temp: 25, Tempco: -4e-3})
	require.NoError(t, err)
	require.NoError(t, l.Hot.Err)
	b.Lines = []*bias.Line{l}
	page := writeBias(t, b)
	text := words(page)
	require.Contains(t, text, "On one gate line: 3 devices, 750 mA together")
	for i, name := range l.Names {
		require.Contains(t, page, fmt.Sprintf("<title>%s cold: ", name))
		require.Contains(t, page, fmt.Sprintf("<title>%s warmed up: ", name))
		require.Contains(t, page, fmt.Sprintf("<title>%s cold without the source resistors: ", name))
		require.Contains(t, text, bias.AmpWords(l.Hot.Devices[i].I))
	}
	require.Contains(t, text, "Greatest to least current")
	// A line without a state says why and has no picture.
	l.Cold.Err, l.Hot = bias.ErrBeyond, bias.State{Err: bias.ErrRunaway}
	require.NotContains(t, writeBias(t, b), `id="bias-line-1"`)
}

func TestBiasOfPChannel(t *testing.T) {
	o := trimmed()
	o.Network.Supply = -8
	page := writeBias(t, biasOf(t, invented.Lot(invented.Options{Devices: 30, Points: 20, Seed: 5, PChannel: true}), o))
	require.Regexp(t, `D02 -3\.\d+ ± `, words(page))
	require.NotContains(t, words(page), "NaN")
}

// Without a network, with a fixed one, with the reach in volts only.
func TestBiasOfLittle(t *testing.T) {
	s := invented.Lot(invented.Options{Devices: 12, Points: 20, Seed: 5})
	bare := writeBias(t, biasOf(t, s, bias.Options{Beta: nan, Temp: nan, Tempco: bias.NoTempco()}))
	require.Contains(t, words(bare), "What the devices draw unadjusted is told where a network is given.")
	require.NotContains(t, bare, `id="bias-draws"`)
	fixed := trimmed()
	fixed.Network.Trimmer, fixed.Network.In, fixed.IdleTol = 0, "", 0.2
	page := writeBias(t, biasOf(t, s, fixed))
	require.Contains(t, words(page), "idle current within 20 %")
	require.Contains(t, page, `class="room"`)
	volts := bias.Options{Beta: nan, Temp: nan, Tempco: bias.NoTempco(), Reach: &bias.Range{Low: 3.3, High: 3.45}}
	page = writeBias(t, biasOf(t, s, volts))
	require.Contains(t, words(page), "the trimmer reaches 3.3")
	for i := range s.Devices { // nothing tells any current
		s.Devices[i].Result.Levels, s.Devices[i].Result.Beta.Value, s.Devices[i].Result.GmIdle.Value, s.Devices[i].Result.Beta.N = nil, nan, nan, 0
	}
	for _, o := range []bias.Options{fixed, volts, trimmed()} {
		require.NotContains(t, words(writeBias(t, biasOf(t, s, o))), "NaN")
	}
	require.Error(t, reportpage.WriteBias(&bytes.Buffer{}, report.Bias{}))
}

func TestBiasOfHostileNames(t *testing.T) {
	page := writeBias(t, biasOf(t, hostileSheet(), trimmed()))
	require.Equal(t, 1, strings.Count(page, "<script"), "a text became a script")
	require.Equal(t, 1, strings.Count(page, "</style>"), "a text ended the style sheet")
	for _, bad := range []string{"\x1b", "\u202e", "<script>alert"} {
		require.NotContains(t, page, bad)
	}
}

// The limit is twice what it was when it was written.
func TestBiasOfALargeLotIsSmall(t *testing.T) {
	b := biasOf(t, large(), trimmed())
	start := time.Now()
	page := writeBias(t, b)
	t.Logf("%d kB in %v", len(page)>>10, time.Since(start))
	require.Less(t, len(page), 2*2200<<10)
}
