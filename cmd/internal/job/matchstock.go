package job

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"gatesill/fit"
	"gatesill/fit/compare"
	"gatesill/fit/match"
	"gatesill/report"
	"gatesill/store/record"
)

// stock is the devices that are offered for matching.
type stock struct {
	sheets  []*report.Sheet
	members []match.Member
	ids     []string // of the devices, by member
	opt     match.Options
	notes   []fit.Warning
	vdsFrom string
}

// stockOf reads and fits the lots at the currents of the first, refuses those that
// were not measured alike, and gathers their devices.
func (e *Env) stockOf(ctx context.Context, lots []string, rq MatchRequest) (*stock, error) {
	ref, err := e.matchSheet(ctx, lots[0], rq)
	if err != nil {
		return nil, err
	}
	st := &stock{sheets: []*report.Sheet{ref}}
	if err := st.options(e, rq); err != nil {
		return nil, err
	}
	for _, name := range lots[1:] {
		s, err := e.candidateSheet(ctx, ref, name, SheetOptions{})
		if err != nil {
			return nil, err
		}
		notes, why, err := st.joins(&s)
		if err != nil {
			return nil, err
		}
		if why != "" {
			return nil, failed("gatesill sweep measures one of them again as the other was; match them one by one, or leave one out", "lots %q and %q: %s; their devices cannot be held against each other", ref.Lot.Name, name, why)
		}
		st.sheets = append(st.sheets, &s)
		for _, w := range notes {
			st.note(w)
		}
	}
	st.gather(rq)
	st.dissipation(rq)
	st.doubts()
	return st, nil
}

// matchSheet fits the first lot, at the current asked for.
func (e *Env) matchSheet(ctx context.Context, name string, rq MatchRequest) (*report.Sheet, error) {
	var o SheetOptions
	if len(rq.By) > 0 && rq.By[0] == "vgsth" {
		o.At = rq.At
	} else {
		o.Idle = rq.At
	}
	s, err := e.Sheet(ctx, name, o)
	return &s, err
}

// options settles what devices are matched by.
func (st *stock) options(e *Env, rq MatchRequest) error {
	ref := st.sheets[0]
	first := ref.SortedBy
	if rq.At.IsKnown() {
		first = fit.KeyVgsIdle
	}
	by, err := rq.criteria(e, first)
	if err != nil {
		return err
	}
	for _, c := range by {
		if (c.Key == fit.KeyVgsIdle || c.Key == fit.KeyGmIdle) && math.IsNaN(ref.IdleCurrent) {
			return failed("--at 250mA, or gatesill lot edit "+Quote(ref.Lot.Name)+" --idle-current 250mA", "lot %q has no idle current to match at", ref.Lot.Name)
		}
	}
	if len(ref.Devices) == 0 {
		return failed("gatesill import "+Quote(ref.Lot.Name)+" FILE", "lot %q has no devices yet", ref.Lot.Name)
	}
	st.opt = match.Options{
		Size: rq.Size, By: by, Aim: match.Aim(rq.Aim), Sets: rq.Sets, At: ref.IdleCurrent, TestCurrent: ref.TestCurrent,
		SourceResistor: rq.SourceResistor.Or(0), Vds: math.NaN(), TimeLimit: defaultTimeLimit,
	}
	if rq.Sets > 0 {
		st.opt.Aim = match.Best
	}
	if rq.Aim == "most" && by[0].Within == 0 {
		return Usage("--within 10mV", "--aim most: as many sets as possible within which tolerance?")
	}
	if x, ok := rq.TimeLimit.Get(); ok {
		st.opt.TimeLimit = time.Duration(x * float64(time.Second))
	}
	if math.IsNaN(ref.IdleCurrent) && by[0].Key == fit.KeyVgsth {
		st.opt.At = ref.TestCurrent // what the readings are of is what the devices are to carry
	}
	st.opt.From, st.opt.To, err = rq.currentsOf(by)
	return err
}

// defaultTimeLimit of the search.
const defaultTimeLimit = 30 * time.Second

// joins says why a lot cannot be matched with the ones before it; "" where it can,
// with what is in doubt. An n-channel and a p-channel part make complementary sets;
// more than one part of a channel is refused.
func (st *stock) joins(s *report.Sheet) (notes []fit.Warning, why string, err error) {
	for _, other := range st.sheets {
		if other.Part.Channel != s.Part.Channel {
			continue
		}
		notes, err = alikeParts(other, s)
		if err != nil {
			return nil, err.Error(), nil
		}
		break
	}
	differ, doubts := unlikeLots(st.sheets[0], s, leading(st.opt.By), false)
	if differ != nil {
		var words []string
		for _, d := range differ {
			words = append(words, fmt.Sprintf("%s %s against %s", d.what, d.ref, d.cand))
		}
		return nil, "not measured alike (" + strings.Join(words, "; ") + ")", nil
	}
	for _, w := range doubts {
		w.Text = strings.ReplaceAll(w.Text, "; --tempco takes it off", "")
		notes = append(notes, w)
	}
	return notes, "", nil
}

// gather makes members of the devices of all lots.
func (st *stock) gather(rq MatchRequest) {
	for _, s := range st.sheets {
		digits, in, of := lastDigitsOf(s), s.InSet(), newSittings(s)
		moved := 0
		for i := range s.Devices {
			d := &s.Devices[i]
			m := match.Member{
				Name: d.Name, Lot: s.Lot.Name, Package: d.Package, Side: d.Side, DateCode: first(d.DateCode, s.Lot.DateCode),
				PChannel: s.Part.Channel == record.PChannel, Out: keptBack(d, of), Step: displayStep(d, digits), Result: d.Result,
			}
			if set := in[d.ID]; set != nil {
				m.Locked = report.SetWords(set)
			}
			if g, ok := rq.Gm.Get(); ok && !m.Result.GmIdle.Ok() {
				m.Result.GmIdle = fit.None()
				m.Result.GmIdle.Value = g
			}
			if m.Out == "" && d.Result.Has(fit.CodeSweepsDisagree) {
				moved++
			}
			st.members, st.ids = append(st.members, m), append(st.ids, d.ID)
		}
		if moved > 0 {
			st.note(fit.Warning{Code: fit.CodeSweepsDisagree, Text: fmt.Sprintf(
				"of %s of lot %s the sweeps of different dates disagree, and the first up sweep counts; gatesill gauge tells whether all moved together", count(moved, "device"), s.Lot.Name)})
		}
	}
}

// unsettled are the warnings by which the value of a device may be that of the
// moment only.
var unsettled = []struct{ code, why string }{
	{fit.CodeHeating, "it had not settled: it warmed up or drifted while it was measured"},
	{fit.CodeOscillation, "it oscillated while it was measured"},
	{fit.CodeCurrentMismatch, "its current and the load resistor disagree"},
	{fit.CodePrefixLost, "its current was read with the wrong prefix"},
}

// keptBack says why a device is not given out whatever it is matched by; "" where
// it is. Those without a value, and those that leak, the matching itself leaves out.
func keptBack(d *report.Device, of sittings) string {
	switch {
	case d.Role == record.Control:
		return "control part, kept for checking the bench"
	case d.State() == fit.Excluded:
		return "excluded" + map[bool]string{true: ": " + d.Device.Why}[d.Device.Why != ""]
	case len(d.Sweeps) == 0:
		return "not measured"
	}
	for _, u := range unsettled {
		if d.Result.Has(u.code) {
			return u.why
		}
	}
	if d.Result.Has(fit.CodeSweepsDisagree) && !severalDates(d, of) {
		return "its sweeps disagree"
	}
	return ""
}

// severalDates reports whether a device was measured in several sessions, or on
// several days: then its sweeps may differ by what the bench and the room did.
func severalDates(d *report.Device, of sittings) bool {
	all := of.of(d)
	return slices.ContainsFunc(all, func(s compare.Sitting) bool { return s.Session != all[0].Session })
}

// displayStep is the coarsest last digit in which the gate voltages of a device were
// written, V; 0: not known.
func displayStep(d *report.Device, digits lastDigits) float64 {
	step := 0.0
	for i := range d.Sweeps {
		if sw := &d.Sweeps[i]; !sw.Excluded {
			step = max(step, digits[digitKey{sw.SourceID, record.VG}])
		}
	}
	return step
}

// dissipation settles the drain voltage that goes with the power of a device: the
// one given, else that of the readings where all lots agree on it.
func (st *stock) dissipation(rq MatchRequest) {
	if v, ok := rq.Vds.Get(); ok {
		st.opt.Vds, st.vdsFrom = v, "as given"
		return
	}
	var all []float64
	for _, s := range st.sheets {
		counted(s, func(sw *report.Sweep) { all = append(all, drainAt(sw, st.opt.At)) })
	}
	if all = slices.DeleteFunc(all, math.IsNaN); len(all) == 0 {
		return
	}
	if m := median(all); all[len(all)-1]-all[0] <= otherDrain*m {
		st.opt.Vds, st.vdsFrom = m, "the V_DS of the readings"
	}
}

// note adds a warning, once.
func (st *stock) note(w fit.Warning) {
	if !slices.Contains(st.notes, w) {
		st.notes = append(st.notes, w)
	}
}

// ofLots adds what there is to say of the lots themselves: sweeps taken under unlike
// conditions, and two populations, whose devices may agree in one number only.
func (st *stock) ofLots() {
	for _, s := range st.sheets {
		if w, ok := unlike(s); ok && len(st.sheets) == 1 { // of several it is told where they are held together
			st.note(w)
		}
		if by := st.opt.By; s.Spread.Populations > 1 && len(by) == 1 && by[0].Key != match.KeyCurve {
			st.note(fit.Warning{Code: fit.CodeTwoPopulations, Text: fmt.Sprintf(
				"lot %s holds two populations: devices of both may read alike at one current and differ at every other; --by vgs-idle,gm-idle or --by curve keeps them apart", s.Lot.Name)})
		}
	}
}

// doubts adds what the differences between devices hold besides the devices.
func (st *stock) doubts() {
	st.ofLots()
	names := map[string]bool{}
	metersSeen := map[string]bool{}
	var lots []string
	var between []float64
	k := 0
	for _, s := range st.sheets {
		of := newSittings(s)
		own := map[string]bool{}
		for i := range s.Devices {
			d := &s.Devices[i]
			if m := &st.members[k+i]; m.Out != "" || m.Locked != "" {
				continue
			}
			for _, sit := range of.of(d) {
				// Files of one lot are no sittings: a curve file may be one device.
				if len(st.sheets) > 1 || !strings.HasPrefix(sit.Session, "file\x1f") {
					own[sit.Session], metersSeen[sit.Meters] = true, true
				}
			}
			if q := d.Result.At(leading(st.opt.By)); q.Ok() && q.UBetween > 0 {
				between = append(between, q.UBetween)
			}
		}
		k += len(s.Devices)
		lots = append(lots, s.Lot.Name)
		for n := range own {
			names[n] = true
		}
	}
	if len(names) > 1 {
		text := "the devices were measured in several sessions"
		if len(lots) > 1 {
			text = "lots " + strings.Join(lots, " and ") + " were not measured in one session"
		}
		if len(metersSeen) > 1 {
			text += ", nor with the same meters"
		}
		text += ": what the devices of a session share (offsets of the meters, temperature) enters the difference between devices of two"
		switch {
		case len(between) == 0:
			text += "; by how much is not known"
		case len(lots) > 1:
			text += ", by about " + report.FormatTwoDigits(median(between), "V") + " each, which alike counts between devices of two lots"
		default:
			text += ", by about " + report.FormatTwoDigits(median(between), "V") + " each, which alike does not count"
		}
		st.note(fit.Warning{Code: fit.CodeOtherSession, Text: text})
	}
}

// enough refuses a stock from which not even one set can be given, with what the
// devices are kept back for.
func (st *stock) enough() error {
	free, locked, out := 0, 0, 0
	for i := range st.members {
		switch m := &st.members[i]; {
		case m.Locked != "":
			locked++
		case m.Out != "" || m.Result.State != fit.Measured && m.Result.State != fit.Above:
			out++
		default:
			free++
		}
	}
	if free >= st.opt.Size {
		return nil
	}
	hint := "gatesill fit " + Quote(st.sheets[0].Lot.Name) + " shows them; --size 2 makes the smallest sets"
	if locked >= st.opt.Size-free && locked > 0 {
		hint = "gatesill set list shows the sets; gatesill set release SET --reason WORDS gives devices free"
	}
	return failed(hint, "%d of %s can be given out, and a set takes %d: %d are in locked sets, %d kept back or without a value",
		free, count(len(st.members), "device"), st.opt.Size, locked, out)
}
