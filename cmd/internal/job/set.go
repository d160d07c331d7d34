package job

import (
	"context"
	"io"
	"strings"

	"gatesill/fit"
	"gatesill/report"
	"gatesill/store"
	"gatesill/store/record"
)

// setOf finds the set that a text means: its name, number, or the beginning of its
// id.
func setOf(tx *store.Tx, text string) (record.Set, error) {
	list, err := tx.FindSets(text)
	switch {
	case err != nil:
		return record.Set{}, err
	case len(list) == 0:
		return record.Set{}, failed("gatesill set list shows the sets", "set %q: not in this store", text)
	case len(list) > 1:
		var names []string
		for _, s := range list {
			names = append(names, s.Name)
		}
		return record.Set{}, Usage("give its name or number", "set %q: the ids of %d sets begin so: %s", text, len(list), strings.Join(names, ", "))
	}
	return list[0], nil
}

// SetList lists the sets with a device of the lot; lot "": all.
func SetList(ctx context.Context, env *Env, lot string) error {
	var sets []record.Set
	err := env.view(ctx, func(tx *store.Tx) error {
		id := ""
		if lot != "" {
			l, _, err := lotOf(tx, lot)
			if err != nil {
				return err
			}
			id = l.ID
		}
		var err error
		sets, err = tx.Sets(id)
		return err
	})
	if err != nil {
		return err
	}
	if env.JSON {
		return report.SetsJSON(env.Out, sets)
	}
	return report.SetsTable(env.Out, sets, env.style())
}

// SetShow shows one set: what it is for, its devices then and now, what became of
// it; or, with labels, the lines to print on labels into that file.
func SetShow(ctx context.Context, env *Env, text, labels string) error {
	var f report.SetFile
	err := env.view(ctx, func(tx *store.Tx) (err error) {
		if f.Set, err = setOf(tx, text); err != nil {
			return err
		}
		f.Changes, err = tx.Changes("set", f.ID)
		return err
	})
	if err != nil {
		return err
	}
	if labels != "" {
		return env.WriteFile(labels, func(w io.Writer) error { return report.SetLabels(w, &f.Set) })
	}
	f.Now = map[string]fit.Result{}
	o := SheetOptions{ReadOnly: true, Idle: f.At}
	if report.LeadingKey(&f.Set) == fit.KeyVgsth {
		o = SheetOptions{ReadOnly: true, At: f.At}
	}
	read := map[string]bool{}
	for _, m := range f.Members {
		if read[m.Lot] {
			continue
		}
		read[m.Lot] = true
		s, err := env.Sheet(ctx, m.Lot, o)
		if err != nil {
			return err
		}
		for _, d := range s.Devices {
			f.Now[d.ID] = d.Result
		}
	}
	if env.JSON {
		return report.SetJSON(env.Out, f)
	}
	return report.SetCard(env.Out, f, env.style())
}

// SetUse marks a reserved set as built into a unit; unit "" is the one that it was
// reserved for.
func SetUse(ctx context.Context, env *Env, text, unit, reason string) error {
	return env.changeSet(ctx, text, func(tx *store.Tx, s record.Set) (record.Set, error) {
		switch {
		case s.State == record.Released:
			return s, failed("gatesill match LOT --lock NUMBER makes a new one", "set %s was released, and does not come back", s.Name)
		case unit == "" && s.Unit == "":
			return s, Usage("--unit 'amplifier 7'", "set %s: used in which unit?", s.Name)
		case s.State == record.Used && (unit == "" || unit == s.Unit):
			return s, failed("gatesill set show "+Quote(s.Name), "set %s is %s already", s.Name, report.SetStateWords(&s))
		case s.State == record.Used && reason == "":
			return s, Usage("--reason 'moved to the other amplifier'", "set %s is %s: moved to another only with a reason", s.Name, report.SetStateWords(&s))
		}
		out, why, err := excludedOf(tx, &s)
		if err != nil {
			return s, err
		}
		if len(out) > 0 {
			return s, failed("gatesill set release "+Quote(s.Name)+" --reason WORDS, or gatesill device include", "set %s: %s excluded since it was made (%s): it is not used like that",
				s.Name, strings.Join(out, ", ")+map[bool]string{true: " was", false: " were"}[len(out) == 1], strings.Join(why, "; "))
		}
		return tx.UseSet(s.ID, unit, reason)
	})
}

// SetRelease gives the devices of a set free.
func SetRelease(ctx context.Context, env *Env, text, reason string) error {
	if reason == "" {
		return Usage("--reason 'one of them failed'", "a set is released only with a reason")
	}
	return env.changeSet(ctx, text, func(tx *store.Tx, s record.Set) (record.Set, error) {
		if s.State == record.Released {
			return s, failed("gatesill set show "+Quote(s.Name), "set %s was released already", s.Name)
		}
		return tx.ReleaseSet(s.ID, reason)
	})
}

// excludedOf names the devices of a set that are left out of everything by now, with
// the reasons.
func excludedOf(tx *store.Tx, s *record.Set) (names, why []string, err error) {
	for _, m := range s.Members {
		d, err := tx.DeviceByID(m.DeviceID)
		if err != nil {
			return nil, nil, err
		}
		if d.Excluded {
			names, why = append(names, d.Name), append(why, first(d.Why, "no reason given"))
		}
	}
	return names, why, nil
}

func (e *Env) changeSet(ctx context.Context, text string, change func(*store.Tx, record.Set) (record.Set, error)) error {
	var s record.Set
	var out []string
	err := e.update(ctx, false, func(tx *store.Tx) error {
		found, err := setOf(tx, text)
		if err != nil {
			return err
		}
		if s, err = change(tx, found); err != nil {
			return invalid(err)
		}
		out, _, err = excludedOf(tx, &s)
		return err
	})
	if err != nil {
		return err
	}
	if e.JSON {
		return report.SetsJSON(e.Out, []record.Set{s})
	}
	e.talk("set %s is %s", report.Clean(s.Name), report.SetStateWords(&s))
	if s.State == record.Released {
		e.talk("%s of it can be given out again; gatesill device exclude NAME --lot LOT --reason WORDS keeps one out that is damaged", count(len(s.Members)-len(out), "device"))
	}
	return nil
}

// SetNames lists the names of sets, for completion; nothing when there is no store.
func SetNames(ctx context.Context, env *Env) []string {
	var out []string
	quiet := *env
	quiet.Err = io.Discard
	_ = quiet.view(ctx, func(tx *store.Tx) error { // completion has nobody to tell an error
		sets, err := tx.Sets("")
		for _, s := range sets {
			if s.State != record.Released && !strings.ContainsAny(s.Name, "\n\t") {
				out = append(out, s.Name)
			}
		}
		return err
	})
	return out
}
