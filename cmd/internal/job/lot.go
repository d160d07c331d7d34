package job

import (
	"context"
	"errors"
	"fmt"
	"strings"

	"gatesill/report"
	"gatesill/store"
	"gatesill/store/record"
)

// LotEdit is what `lot add` and `lot edit` may set: fields that are nil stay as
// they are.
type LotEdit struct {
	Part    *string // name of the part
	Channel *record.Channel
	Mode    *record.Mode
	// Numbers of the part, SI base units.
	OffVoltage, TestCurrent, TestVDS, IdleCurrent, VgsthMin, VgsthMax, MaxVgs, MaxVds, MaxID, MaxPD, MaxTemp, Rth *record.Num

	Supplier, DateCode, Marking, Sampled, SendBack, Note *string
	Quantity                                             *record.Num
	Margin, Guard                                        *record.Amount
}

// ofPart reports whether the edit sets anything that holds for the part.
func (e LotEdit) ofPart() bool {
	if e.Channel != nil || e.Mode != nil {
		return true
	}
	for _, n := range []*record.Num{e.OffVoltage, e.TestCurrent, e.TestVDS, e.IdleCurrent, e.VgsthMin, e.VgsthMax, e.MaxVgs, e.MaxVds, e.MaxID, e.MaxPD, e.MaxTemp, e.Rth} {
		if n != nil {
			return true
		}
	}
	return false
}

// limits reports whether the edit sets a limit of V_GS(th).
func (e LotEdit) limits() bool { return e.VgsthMin != nil || e.VgsthMax != nil }

// check refuses amounts that mean nothing, before anything is stored.
func (e LotEdit) check() error {
	if m := e.Margin; m != nil && m.Unit != "" && !(m.Value > 0) {
		return Usage("--margin 50mV, --margin 10%, or --margin none, which clears it", "--margin: %s, must be above 0", report.AmountWords(*m))
	}
	if g := e.Guard; g != nil && g.Value < 0 {
		return Usage("--guard 20mV, --guard 2u, or --guard none, which clears it", "--guard: %s, must be 0 or more", report.AmountWords(*g))
	}
	return nil
}

// inOrder refuses limits of a part that are the wrong way round.
func inOrder(p record.Part) error {
	low, ok := p.VgsthMin.Get()
	high, ok2 := p.VgsthMax.Get()
	if ok && ok2 && low > high {
		return Usage("--vgsth-min 2 --vgsth-max 4; both are changed together, and more negative is lower", "part %q: the lower limit of V_GS(th), %s, is above the upper one, %s",
			p.Name, report.FormatGiven(low, "V"), report.FormatGiven(high, "V"))
	}
	return nil
}

// doubt warns of amounts that were probably meant in another unit.
func (e LotEdit) doubt(env *Env, part record.Part) {
	if e.Margin != nil {
		env.doubtMargin(*e.Margin)
	}
	if e.Guard != nil {
		env.doubtGuard(*e.Guard, part)
	}
}

func set[T any](dst *T, src *T) {
	if src != nil {
		*dst = *src
	}
}

func (e LotEdit) applyPart(p *record.Part) {
	set(&p.Channel, e.Channel)
	set(&p.Mode, e.Mode)
	set(&p.OffVoltage, e.OffVoltage)
	set(&p.TestCurrent, e.TestCurrent)
	set(&p.TestVDS, e.TestVDS)
	set(&p.IdleCurrent, e.IdleCurrent)
	set(&p.VgsthMin, e.VgsthMin)
	set(&p.VgsthMax, e.VgsthMax)
	set(&p.MaxVgs, e.MaxVgs)
	set(&p.MaxVds, e.MaxVds)
	set(&p.MaxID, e.MaxID)
	set(&p.MaxPD, e.MaxPD)
	set(&p.MaxTemp, e.MaxTemp)
	set(&p.Rth, e.Rth)
}

func (e LotEdit) applyLot(l *record.Lot) {
	set(&l.Supplier, e.Supplier)
	set(&l.DateCode, e.DateCode)
	set(&l.Marking, e.Marking)
	set(&l.Sampled, e.Sampled)
	set(&l.Note, e.Note)
	set(&l.Quantity, e.Quantity)
	if e.Margin != nil && *e.Margin != l.Margin {
		l.Margin, l.MarginSetAt = *e.Margin, record.Now()
	}
	guard, sendBack := l.Guard, l.SendBack
	set(&l.Guard, e.Guard)
	set(&l.SendBack, e.SendBack)
	if l.Guard != guard || l.SendBack != sendBack {
		l.DecidedAt = record.Now()
	}
}

// unnamedPart is the name of the part of a lot for which none was given.
func unnamedPart(lot string) string { return "part of lot " + lot }

// LotAdd makes a lot, and its part where that is new.
func LotAdd(ctx context.Context, env *Env, name string, edit LotEdit) error {
	if err := edit.check(); err != nil {
		return err
	}
	var shared []string
	var part record.Part
	err := env.update(ctx, true, func(tx *store.Tx) (err error) {
		if _, err := tx.Lot(name); err == nil {
			return failed("gatesill lot edit "+Quote(name)+" changes it", "lot %q: already there", name)
		} else if !errors.Is(err, store.ErrNotFound) {
			return err
		}
		if part, err = partFor(tx, name, edit.Part); err != nil {
			return err
		}
		if part.ID == "" || edit.ofPart() {
			edit.applyPart(&part)
			if err := inOrder(part); err != nil {
				return err
			}
			if err := tx.PutPart(&part, "lot add"); err != nil {
				return invalid(err)
			}
			if shared, err = tx.LotsOfPart(part.ID); err != nil {
				return err
			}
		}
		lot := record.Lot{Name: name, PartID: part.ID, CreatedAt: record.Now()}
		edit.applyLot(&lot)
		return invalid(tx.PutLot(&lot, "lot add"))
	})
	if err != nil {
		return err
	}
	edit.doubt(env, part)
	env.tellShared(shared, name)
	env.talk("lot %s added", report.Clean(name))
	return nil
}

// partFor gives the part of that name, a new one (ID "") when it is not there
// yet. Without a name the part is named after the lot.
func partFor(tx *store.Tx, lot string, name *string) (record.Part, error) {
	want := unnamedPart(lot)
	if name != nil {
		want = *name
	}
	part, err := tx.Part(want)
	if errors.Is(err, store.ErrNotFound) {
		return record.NewPart(want), nil
	}
	return part, err
}

// LotEditJob changes a lot and its part.
func LotEditJob(ctx context.Context, env *Env, name string, edit LotEdit, reason string) error {
	if err := edit.check(); err != nil {
		return err
	}
	var shared []string
	var part record.Part
	err := env.update(ctx, false, func(tx *store.Tx) error {
		lot, of, err := lotOf(tx, name)
		if err != nil {
			return err
		}
		part = of
		if edit.Part != nil && *edit.Part != part.Name {
			if part, err = repoint(tx, lot, part, *edit.Part, reason); err != nil {
				return err
			}
			lot.PartID = part.ID
		}
		if edit.ofPart() {
			edit.applyPart(&part)
			if err := inOrder(part); err != nil {
				return err
			}
			if err := tx.PutPart(&part, reason); err != nil {
				return invalid(err)
			}
			if shared, err = tx.LotsOfPart(part.ID); err != nil {
				return err
			}
		}
		edit.applyLot(&lot)
		if edit.Guard == nil && edit.limits() { // a window made narrower may be filled by the guard band there is
			edit.Guard = &lot.Guard
		}
		return invalid(tx.PutLot(&lot, reason))
	})
	if err != nil {
		return err
	}
	edit.doubt(env, part)
	env.tellShared(shared, name)
	env.talk("lot %s changed", report.Clean(name))
	return nil
}

// repoint gives the part of the new name: the existing one, or the unnamed part
// of the lot renamed, or a new one with the numbers of the old.
func repoint(tx *store.Tx, lot record.Lot, part record.Part, name, reason string) (record.Part, error) {
	other, err := tx.Part(name)
	if err == nil || !errors.Is(err, store.ErrNotFound) {
		return other, err
	}
	if part.Name != unnamedPart(lot.Name) {
		part.ID = ""
	}
	part.Name = name
	return part, invalid(tx.PutPart(&part, reason))
}

// tellShared says which other lots a change of their part reaches.
func (e *Env) tellShared(lots []string, but string) {
	var others []string
	for _, l := range lots {
		if l != but {
			others = append(others, report.Clean(l))
		}
	}
	if len(others) > 0 {
		e.talk("this holds for every lot of the part: also for %s", strings.Join(others, ", "))
	}
}

// invalid makes a record that does not validate a usage error.
func invalid(err error) error {
	if errors.Is(err, record.ErrInvalid) {
		return Usage("", "%w", err)
	}
	return err
}

// LotList lists all lots.
func LotList(ctx context.Context, env *Env) error {
	var lots []report.LotRow
	err := env.view(ctx, func(tx *store.Tx) error {
		ls, err := tx.Lots()
		if err != nil {
			return err
		}
		for _, l := range ls {
			p, err := tx.PartByID(l.PartID)
			if err != nil {
				return err
			}
			lots = append(lots, report.LotRow{Lot: l, Part: p})
		}
		return nil
	})
	if err != nil {
		return err
	}
	if env.JSON {
		return report.LotsJSON(env.Out, lots)
	}
	return report.LotsTable(env.Out, lots, env.style())
}

// LotShow shows one lot with its part, its devices and what was changed.
func LotShow(ctx context.Context, env *Env, name string) error {
	var f report.LotFile
	err := env.view(ctx, func(tx *store.Tx) error {
		var err error
		if f.Lot, f.Part, err = lotOf(tx, name); err != nil {
			return err
		}
		if f.Devices, err = tx.Devices(f.Lot.ID); err != nil {
			return err
		}
		if f.Sources, err = tx.Sources(f.Lot.ID); err != nil {
			return err
		}
		if f.Sessions, err = tx.Sessions(f.Lot.ID); err != nil {
			return err
		}
		if f.Sets, err = tx.Sets(f.Lot.ID); err != nil {
			return err
		}
		sweeps, err := tx.Sweeps(f.Lot.ID, false)
		if err != nil {
			return err
		}
		f.Lot.DevicesCount, f.Lot.SweepsCount = len(f.Devices), len(sweeps)
		of, err := tx.Changes("part", f.Part.ID)
		if err != nil {
			return err
		}
		f.Changes, err = tx.Changes("lot", f.Lot.ID)
		f.Changes = append(of, f.Changes...)
		return err
	})
	if err != nil {
		return err
	}
	if env.JSON {
		return report.LotFileJSON(env.Out, f)
	}
	return report.LotFileText(env.Out, f, env.style())
}

// LotRename gives a lot another name.
func LotRename(ctx context.Context, env *Env, name, to, reason string) error {
	err := env.update(ctx, false, func(tx *store.Tx) error {
		lot, part, err := lotOf(tx, name)
		if err != nil {
			return err
		}
		if err := record.CheckName("lot", to); err != nil {
			return invalid(err)
		}
		if _, err := tx.Lot(to); err == nil {
			return failed("", "lot %q: already there", to)
		}
		if part.Name == unnamedPart(name) {
			part.Name = unnamedPart(to)
			if err := tx.PutPart(&part, reason); err != nil {
				return err
			}
		}
		return tx.RenameLot(lot.ID, to, reason)
	})
	if err == nil {
		env.talk("lot %s is now %s", report.Clean(name), report.Clean(to))
	}
	return err
}

// Quote writes a name so that a shell takes it as one word.
func Quote(name string) string {
	if name != "" && strings.IndexFunc(name, func(r rune) bool {
		return !(r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z' || r >= '0' && r <= '9' || strings.ContainsRune("-_./+=@%", r))
	}) < 0 && !strings.HasPrefix(name, "-") {
		return name
	}
	return "'" + strings.ReplaceAll(name, "'", `'\''`) + "'"
}

func (e *Env) style() report.Style {
	return report.Style{Color: e.Color, Width: e.Width}
}

// count writes "1 device" or "3 devices".
func count(n int, noun string) string {
	if n == 1 {
		return "1 " + noun
	}
	return fmt.Sprintf("%d %ss", n, noun)
}
