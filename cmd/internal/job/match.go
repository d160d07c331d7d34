package job

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"slices"
	"strconv"
	"strings"
	"time"

	"gatesill/fit"
	"gatesill/fit/match"
	"gatesill/report"
	"gatesill/report/page"
	"gatesill/store"
	"gatesill/store/record"
)

// MatchRequest is how devices are put in sets.
type MatchRequest struct {
	Size           int
	Within         []string // "10mV", "5%", by criterion
	By             []string // "vgsth", "vgs-idle", "gm-idle", "curve"; nil: as the lot is sorted
	Weights        []string // by criterion
	Currents       string   // "50mA..1A", of the curve
	Aim            string   // "most", "total", "worst"; "": by what else is given
	Sets           int      // this many only; 0: all
	At             record.Num
	SourceResistor record.Num // ohm
	Vds            record.Num // V, for the dissipation; unknown: that of the sweeps
	Gm             record.Num // S, of devices whose readings tell none
	TimeLimit      record.Num // s
	Partner        string     // device that a partner is sought for
	Lock           []string   // numbers of sets to store, or "all"
	Unit           string     // what they are for
	Labels         string     // file for lines to print on labels
	Page           string     // file for the page of sets; "": none
}

// matchKeys are the quantities that devices are matched by, by their names as
// flags take them.
var matchKeys = map[string]fit.Key{
	"vgsth": fit.KeyVgsth, "vgs-idle": fit.KeyVgsIdle, "gm-idle": fit.KeyGmIdle, "curve": match.KeyCurve,
}

// greatestWithin is a tolerance from which a unit was probably forgotten.
const greatestWithin = 5 // V

// check says what is wrong with the request before anything is read.
func (rq *MatchRequest) check(lots []string) error {
	for i, l := range lots {
		if slices.Contains(lots[:i], l) {
			return Usage("name each lot once", "lot %q: named twice", l)
		}
	}
	if rq.Size < 2 || rq.Size > 64 {
		return Usage("--size 2", "--size: %d devices in a set, must be from 2 to 64", rq.Size)
	}
	if rq.Sets < 0 {
		return Usage("--sets 10", "--sets: %d, must be 1 or more", rq.Sets)
	}
	if rq.Sets > 0 && (rq.Aim == "most" || rq.Aim == "worst") {
		return Usage("leave one of them out", "--sets %d and --aim %s exclude each other: a given number of sets is chosen for the least sum", rq.Sets, rq.Aim)
	}
	for _, n := range []struct {
		flag, unit string
		x          record.Num
		zero       bool
	}{{"at", "A", rq.At, false}, {"source-resistor", "ohm", rq.SourceResistor, true}, {"vds", "V", rq.Vds, false}, {"gm", "S", rq.Gm, false}, {"time-limit", "s", rq.TimeLimit, false}} {
		if x, ok := n.x.Get(); ok && (x < 0 || x == 0 && !n.zero) {
			return Usage("", "--%s: %g %s, must be above 0", n.flag, x, n.unit)
		}
	}
	if rq.Unit != "" && len(rq.Lock) == 0 {
		return Usage("--lock 1,3 --unit WORDS", "--unit says what locked sets are for, and none is locked")
	}
	if len(rq.Lock) > 0 {
		if _, err := rq.locked(math.MaxInt); err != nil {
			return err
		}
	}
	return nil
}

// locked gives the numbers of the sets to store, of n.
func (rq *MatchRequest) locked(n int) ([]int, error) {
	var out []int
	for _, text := range rq.Lock {
		if text == "all" {
			if len(rq.Lock) > 1 {
				return nil, Usage("--lock all, or numbers", "--lock: all and numbers exclude each other")
			}
			for i := range n {
				if n == math.MaxInt {
					break // only looked at
				}
				out = append(out, i+1)
			}
			return out, nil
		}
		k, err := strconv.Atoi(strings.TrimSpace(text))
		if err != nil || k < 1 {
			return nil, Usage("--lock 1,3 or --lock all", "--lock %s: no number of a set", text)
		}
		if k > n {
			return nil, failed("leave out --lock to see them", "--lock %d: there are only %s", k, count(n, "set"))
		}
		if slices.Contains(out, k) {
			return nil, Usage("name each once", "--lock %d: named twice", k)
		}
		out = append(out, k)
	}
	return out, nil
}

// criteria reads --by, --within and --weights; first is the quantity where none is
// named.
func (rq *MatchRequest) criteria(env *Env, first fit.Key) ([]match.Criterion, error) {
	var by []match.Criterion
	for _, name := range rq.By {
		k, ok := matchKeys[name]
		if !ok {
			return nil, Usage("--by vgs-idle,gm-idle or --by curve", "--by %s: no such quantity; there are vgs-idle, vgsth, gm-idle and curve", name)
		}
		if slices.ContainsFunc(by, func(c match.Criterion) bool { return c.Key == k }) {
			return nil, Usage("name each once", "--by %s: named twice", name)
		}
		by = append(by, match.Criterion{Key: k})
	}
	if by == nil {
		by = []match.Criterion{{Key: first}}
	}
	if by[0].Key == fit.KeyGmIdle {
		return nil, Usage("--by vgs-idle,gm-idle", "--by gm-idle: distances are in volts, so that a gate voltage or the curve comes first")
	}
	if len(rq.Within) > len(by) || len(rq.Weights) > len(by) {
		return nil, Usage("--by vgs-idle,gm-idle --within 10mV,5% --weights 1,0.5", "more tolerances or weights than quantities: %d and %d for %d", len(rq.Within), len(rq.Weights), len(by))
	}
	for i, text := range rq.Within {
		c := &by[i]
		unit, like := "V", "10mV"
		if c.Key == fit.KeyGmIdle {
			unit, like = "%", "5%"
		}
		a, err := record.ParseAmount(text, unit)
		if err != nil {
			return nil, Usage("--within "+like+" for "+string(c.Key), "--within: %w", err)
		}
		if !(a.Value > 0) {
			return nil, Usage("--within "+like, "--within: %s, must be above 0", text)
		}
		if c.Within = a.Value; unit == "%" {
			c.Within /= 100
		} else if a.Value >= greatestWithin {
			env.warn("within %s: a bare number is in volts, 10 mV is written 10mV", report.AmountWords(a))
		}
	}
	for i, text := range rq.Weights {
		x, err := record.ParseNumber(text, "")
		if err != nil || x < 0 {
			return nil, Usage("--weights 1,0.5", "--weights %s: no number from 0 up", text)
		}
		by[i].Weight = x
	}
	if by[0].Weight == 0 {
		by[0].Weight = 1 // it leads
	}
	for i := range by[1:] {
		if c := &by[i+1]; c.Within == 0 && c.Weight == 0 {
			return nil, Usage("--within 10mV,5% limits it, --weights 1,0.5 lets it count", "--by %s: %s has neither tolerance nor weight, so that it would do nothing", strings.Join(rq.By, ","), rq.By[i+1])
		}
	}
	return by, nil
}

// currentsOf reads --currents.
func (rq *MatchRequest) currentsOf(by []match.Criterion) (from, to float64, err error) {
	if rq.Currents == "" {
		return 0, 0, nil
	}
	if !slices.ContainsFunc(by, func(c match.Criterion) bool { return c.Key == match.KeyCurve }) {
		return 0, 0, Usage("--by curve --currents "+Quote(rq.Currents), "--currents are those at which curves are compared, and --by curve is not given")
	}
	low, high, ok := strings.Cut(rq.Currents, "..")
	if ok {
		if from, err = record.ParseNumber(low, "A"); err == nil {
			to, err = record.ParseNumber(high, "A")
		}
	}
	if !ok || err != nil || !(from > 0 && from < to) {
		return 0, 0, Usage("--currents 50mA..1A", "--currents %s: not two currents, the lower one first", rq.Currents)
	}
	return from, to, nil
}

// Match puts devices of the lots in sets, stores those that are to be locked, and
// shows them. Interrupted it shows the best found until then, and locks nothing.
func Match(ctx context.Context, env *Env, lots []string, rq MatchRequest) error {
	if err := rq.check(lots); err != nil {
		return err
	}
	if rq.Partner != "" {
		return partnerFor(ctx, env, lots, rq)
	}
	if len(lots) == 0 {
		return Usage("gatesill match LOT", "match: no lot")
	}
	if rq.Page == "-" && (env.JSON || rq.Labels == "-") {
		return Usage("--output FILE.html", "--output -: stdout takes one thing at a time")
	}
	st, err := env.stockOf(ctx, lots, rq)
	if err != nil {
		return err
	}
	m := report.Matched{Sheets: st.sheets, Members: st.members, Notes: st.notes, Gm: rq.Gm.Float(), SourceOhms: st.opt.SourceResistor, Vds: st.opt.Vds, VdsFrom: st.vdsFrom}
	if err := st.enough(); err != nil {
		return err
	}
	found, ended, err := env.search(ctx, st)
	if found == nil || err != nil && ctx.Err() == nil {
		return matchFailure(st, err)
	}
	m.Matching, m.Cut, m.TimeEnded = *found, ctx.Err() != nil, ended
	// What there is to say of several sessions stands in the notes, with its size.
	m.Warnings = slices.DeleteFunc(m.Warnings, func(w fit.Warning) bool { return w.Code == fit.CodeCommonUnknown })
	if !m.Cut {
		m.Near, m.More = near(ctx, st, found), more(ctx, st, found)
		if m.Locked, err = env.lock(ctx, st, &m, rq); err != nil {
			return err
		}
	} else if len(rq.Lock) > 0 {
		env.warn("interrupted: no set was locked")
	}
	if rq.Labels != "" {
		if err := env.WriteFile(rq.Labels, m.Labels); err != nil {
			return err
		}
	}
	if err := env.sheetPage(rq.Page, "sets", func(w io.Writer) error { return page.WriteSets(w, m) }); err != nil {
		return err
	}
	if env.JSON {
		err = report.MatchJSON(env.Out, m)
	} else if rq.Labels != "-" && rq.Page != "-" {
		err = report.MatchTable(env.Out, m, env.style())
	}
	return errors.Join(err, ctx.Err())
}

// search runs the matching, with a word on stderr while it takes long; ended: by its
// time limit, so that another run may find other sets.
func (e *Env) search(ctx context.Context, st *stock) (found *match.Matching, ended bool, err error) {
	limit := st.opt.TimeLimit
	p := newProgress(e, "searching for better sets, at most "+limit.String())
	done := make(chan struct{})
	stopped := make(chan struct{})
	go func() {
		defer close(stopped)
		tick := time.NewTicker(200 * time.Millisecond)
		defer tick.Stop()
		for start := time.Now(); ; {
			select {
			case <-done:
				return
			case <-tick.C:
				p.At(min(int64(time.Since(start)), int64(limit)), int64(limit))
			}
		}
	}()
	start := time.Now()
	found, err = match.Match(ctx, st.members, st.opt)
	ended = found != nil && found.Bound.Kind == match.LowerBound && time.Since(start) >= limit
	close(done)
	<-stopped
	p.Done()
	e.detail("%s matched in %v", count(len(st.members), "device"), time.Since(start).Round(time.Millisecond))
	return found, ended, err
}

// matchFailure gives an error of the matching its exit code and a hint.
func matchFailure(st *stock, err error) error {
	name := Quote(st.sheets[0].Lot.Name)
	switch {
	case errors.Is(err, context.Canceled):
		return err
	case errors.Is(err, match.ErrTooFew):
		return failed("gatesill fit "+name+" shows which devices have a value", "%w", err)
	case errors.Is(err, match.ErrCurrents):
		return failed("--currents LOW..HIGH inside what was swept; gatesill fit "+name+" shows the curves' values", "%w", err)
	}
	return Usage("gatesill help match", "%w", err)
}

// nearly is how many tolerances left-over devices may be apart for a repair to be
// worth a word, and nearTime how long they are searched for such sets (judgement).
const (
	nearly   = 4
	nearTime = 2 * time.Second
)

// near matches the left-over devices among themselves, without the tolerances: what
// a trimmed gate or a source resistor would put right.
func near(ctx context.Context, st *stock, found *match.Matching) []match.Set {
	if found.Aim != match.Most {
		return nil
	}
	members := slices.Clone(st.members)
	free := 0
	for i := range members {
		if !slices.ContainsFunc(found.LeftOver, func(l match.LeftOver) bool { return l.Member == i && !l.Out }) {
			members[i].Out = "in a set"
			continue
		}
		free++
	}
	if free < found.Size {
		return nil
	}
	opt := st.opt
	opt.By, opt.Aim, opt.NoTradeOff, opt.TimeLimit = []match.Criterion{{Key: st.opt.By[0].Key}}, match.Total, true, nearTime
	rest, err := match.Match(ctx, members, opt)
	if err != nil {
		return nil // a word beside the sets, which stand without it
	}
	return slices.DeleteFunc(rest.Sets, func(s match.Set) bool { return s.Spread > nearly*st.opt.By[0].Within })
}

// moreRuns is how many draws tell what more devices would give, and moreTime how
// long that may take: it is a word beside the sets.
const (
	moreRuns = 200
	moreTime = time.Second
)

// more asks what buying more devices would give, where sets are limited by a
// tolerance: a tenth, a quarter and a half of what there is, in round numbers.
func more(ctx context.Context, st *stock, found *match.Matching) []match.More {
	if found.Aim != match.Most || found.Offered < leastForMore {
		return nil
	}
	var ks []int
	for _, share := range []float64{0.1, 0.25, 0.5} {
		if k := roundUp(max(2, share*float64(found.Offered))); !slices.Contains(ks, k) {
			ks = append(ks, k)
		}
	}
	ctx, cancel := context.WithTimeout(ctx, moreTime)
	defer cancel()
	list, err := match.MoreParts(ctx, st.members, st.opt, ks, moreRuns, 1)
	if err != nil && len(list) == 0 {
		return nil // in a short time nothing can be said; the sets stand without it
	}
	return list
}

// leastForMore is the size of a lot below which its shape says too little of what
// further devices would be like (judgement).
const leastForMore = 10

// roundUp gives the next of 1, 2, 5, 10, 20, 25, 50, 100, ...
func roundUp(x float64) int {
	for scale := 1; ; scale *= 10 {
		for _, k := range []float64{1, 2, 2.5, 5} {
			if n := k * float64(scale); n >= x && n == math.Trunc(n) {
				return int(n)
			}
		}
	}
}

// lock stores sets of this very result.
func (e *Env) lock(ctx context.Context, st *stock, m *report.Matched, rq MatchRequest) (map[int]record.Set, error) {
	numbers, err := rq.locked(len(m.Sets))
	if err != nil || len(numbers) == 0 {
		return nil, err
	}
	var list []record.Set
	for _, n := range numbers {
		s := &m.Sets[n-1]
		var members []int
		for _, d := range s.Devices {
			members = append(members, d.Member)
		}
		list = append(list, st.record(members, m.By, m.At, s.Spread, rq.Unit))
		if !s.Within {
			e.warn("set %d is beyond the tolerance", n)
		}
	}
	return e.store(ctx, numbers, list)
}

// store keeps new sets in one go, and gives them by their numbers.
func (e *Env) store(ctx context.Context, numbers []int, list []record.Set) (map[int]record.Set, error) {
	err := e.update(ctx, false, func(tx *store.Tx) error {
		for i := range list {
			err := tx.PutSet(&list[i], "")
			if errors.Is(err, store.ErrExists) {
				return failed("gatesill set list shows the sets; gatesill set release SET --reason WORDS gives devices free", "%w; nothing was locked", err)
			}
			if err != nil {
				return invalid(err)
			}
		}
		return nil
	})
	if err != nil {
		return nil, err
	}
	out := map[int]record.Set{}
	for i, n := range numbers {
		out[n] = list[i]
		e.talk("set %d is %s, %s", n, report.Clean(list[i].Name), report.SetStateWords(&list[i]))
	}
	return out, nil
}

// record is a set of members as it is kept: what it was matched by, and all that is
// known of its devices now.
func (st *stock) record(members []int, by []match.Criterion, at, spread float64, unit string) record.Set {
	s := record.Set{Unit: unit, At: record.Known(at), Spread: record.Known(spread)}
	if r := st.opt.SourceResistor; r > 0 {
		s.SourceResistor = record.Known(r)
	}
	if by[0].Key == fit.KeyVgsth {
		s.At = record.Known(st.sheets[0].TestCurrent)
	}
	for _, c := range by {
		crit := record.Criterion{Quantity: string(c.Key)}
		if c.Within > 0 {
			crit.Within = record.Known(c.Within)
		}
		if c.Weight > 0 {
			crit.Weight = record.Known(c.Weight)
		}
		s.By = append(s.By, crit)
	}
	for _, i := range members {
		m := &st.members[i]
		readings := map[string]record.Value{}
		for _, k := range fit.Keys {
			if q := m.Result.At(k); q.Ok() {
				readings[string(k)] = record.Value{Value: record.Known(q.Value), U: record.Known(q.U), UBetween: record.Known(q.UBetween), UAbsolute: record.Known(q.UAbsolute), N: q.N}
			}
		}
		if by[0].Key == match.KeyCurve {
			for _, l := range m.Result.Levels {
				readings[fmt.Sprintf("vgs_at_%gA_V", l.I)] = record.Value{Value: record.Known(l.Vg), U: record.Known(l.U)}
			}
		}
		s.Members = append(s.Members, record.SetMember{DeviceID: st.ids[i], Device: m.Name, Lot: m.Lot, Readings: readings})
	}
	return s
}
