package job

import (
	"context"
	"errors"
	"math"
	"slices"
	"strings"

	"gatesill/fit"
	"gatesill/fit/match"
	"gatesill/report"
	"gatesill/store"
	"gatesill/store/record"
)

// partnerFor ranks the stock as partners for one device: the devices of the lots
// named, or of all lots of its part, as far as they were measured as it was.
func partnerFor(ctx context.Context, env *Env, lots []string, rq MatchRequest) error {
	if rq.Size != 2 {
		return Usage("leave out --size", "--partner-for seeks one partner, not sets of %d", rq.Size)
	}
	if rq.Page != "" {
		return Usage("leave out --output", "--output is the page of sets, and --partner-for makes none")
	}
	if rq.Aim != "" || rq.Sets > 0 || rq.Labels != "" {
		return Usage("gatesill help match", "--partner-for takes no --aim, --sets and --labels: all partners are ranked")
	}
	d, l, err := env.soughtFor(ctx, rq.Partner)
	if err != nil {
		return err
	}
	x := report.Partners{}
	if len(lots) == 0 {
		if err := env.view(ctx, func(tx *store.Tx) (err error) {
			lots, err = tx.LotsOfPart(l.PartID)
			return err
		}); err != nil {
			return err
		}
	}
	ref, err := env.matchSheet(ctx, l.Name, rq)
	if err != nil {
		return err
	}
	st := &stock{sheets: []*report.Sheet{ref}}
	if err := st.options(env, rq); err != nil {
		return err
	}
	for _, name := range lots {
		if name == l.Name {
			continue
		}
		s, err := env.candidateSheet(ctx, ref, name, SheetOptions{})
		if err != nil {
			return err
		}
		notes, why, err := st.joins(&s)
		if err != nil {
			return err
		}
		if why != "" {
			x.Refused = append(x.Refused, report.RefusedLot{Lot: name, Why: why})
			continue
		}
		st.sheets = append(st.sheets, &s)
		for _, w := range notes {
			st.note(w)
		}
	}
	st.gather(rq)
	st.dissipation(rq)
	st.doubts()
	me := slices.Index(st.ids, d.ID)
	if !slices.Contains(lots, l.Name) { // its own lot is not in the stock that was named
		for i := range ref.Devices {
			if i != me {
				st.members[i].Out = "not in the stock to search"
			}
		}
	}
	list, err := match.PartnersFor(st.members, me, st.opt)
	if err != nil {
		if errors.Is(err, match.ErrNoDevice) {
			return failed("gatesill device show "+Quote(d.Name)+" --lot "+Quote(l.Name)+" says why; --at CURRENT asks at another current", "%w", err)
		}
		return matchFailure(st, err)
	}
	list = slices.DeleteFunc(list, func(p match.Partner) bool { return st.members[p.Member].Out == "not in the stock to search" })
	x.Sheet, x.By, x.At, x.Members, x.Partners, x.Notes, x.InSet = ref, st.opt.By, st.opt.At, st.members, list, st.notes, st.members[me].Locked
	x.Step = st.members[me].Step
	x.File = report.DeviceFile{Lot: ref.Lot, By: leading(st.opt.By), Tempco: math.NaN()}
	for _, dev := range ref.Devices {
		if dev.ID == d.ID {
			x.File.Device = dev
		}
	}
	timelineOf(&x.File, ref)
	if x.Locked, err = env.lockPartners(ctx, st, me, list, rq); err != nil {
		return err
	}
	if env.JSON {
		return report.PartnersJSON(env.Out, x)
	}
	return report.PartnersTable(env.Out, x, env.style())
}

// leading is the quantity that stands for what devices are matched by.
func leading(by []match.Criterion) fit.Key {
	if by[0].Key == match.KeyCurve {
		return fit.KeyVgsIdle
	}
	return by[0].Key
}

// lockPartners stores the device with one partner of the list.
func (e *Env) lockPartners(ctx context.Context, st *stock, me int, list []match.Partner, rq MatchRequest) (map[int]record.Set, error) {
	given := slices.DeleteFunc(slices.Clone(list), func(p match.Partner) bool { return p.Refused != "" })
	numbers, err := rq.locked(len(given))
	if err != nil || len(numbers) == 0 {
		return nil, err
	}
	if len(numbers) > 1 {
		return nil, Usage("--lock 1", "--lock: a device goes with one partner, not with %d", len(numbers))
	}
	p := given[numbers[0]-1]
	s := st.record([]int{me, p.Member}, st.opt.By, st.opt.At, p.Spreads[0], rq.Unit)
	return e.store(ctx, numbers, []record.Set{s})
}

// soughtFor finds a device by its name, or by LOT/DEVICE where several lots have it.
func (e *Env) soughtFor(ctx context.Context, text string) (d record.Device, l record.Lot, err error) {
	err = e.view(ctx, func(tx *store.Tx) error {
		if d, l, err = deviceOf(tx, "", text); err == nil {
			return nil
		}
		for i := range text {
			if text[i] != '/' {
				continue
			}
			if lot, e := tx.Lot(text[:i]); e == nil {
				if d, err = tx.Device(lot.ID, text[i+1:]); err == nil {
					l = lot
					return nil
				}
				return failed("gatesill lot show "+Quote(lot.Name)+" lists its devices", "device %q: not in lot %q", text[i+1:], lot.Name)
			}
		}
		var f *Failure
		if errors.As(err, &f) && strings.Contains(f.Hint, "--lot") {
			f.Hint = "say which with --partner-for LOT/DEVICE"
		}
		return err
	})
	return d, l, err
}
