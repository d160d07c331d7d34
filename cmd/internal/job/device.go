package job

import (
	"context"
	"errors"
	"strings"

	"gatesill/fit/gauge"
	"gatesill/report"
	"gatesill/store"
	"gatesill/store/record"
)

// deviceOf finds a device by name; lot "" looks in all lots and wants it to be
// in one only.
func deviceOf(tx *store.Tx, lot, name string) (record.Device, record.Lot, error) {
	if lot != "" {
		l, _, err := lotOf(tx, lot)
		if err != nil {
			return record.Device{}, l, err
		}
		d, err := tx.Device(l.ID, name)
		if errors.Is(err, store.ErrNotFound) {
			return d, l, failed("gatesill lot show "+Quote(lot)+" lists its devices", "device %q: not in lot %q", name, lot)
		}
		return d, l, err
	}
	ds, err := tx.FindDevices(name)
	if err != nil {
		return record.Device{}, record.Lot{}, err
	}
	lots, err := tx.Lots()
	if err != nil {
		return record.Device{}, record.Lot{}, err
	}
	byID := map[string]record.Lot{}
	for _, l := range lots {
		byID[l.ID] = l
	}
	switch len(ds) {
	case 0:
		return record.Device{}, record.Lot{}, failed("gatesill lot list shows the lots", "device %q: in no lot", name)
	case 1:
		return ds[0], byID[ds[0].LotID], nil
	}
	var names []string
	for _, d := range ds {
		names = append(names, Quote(byID[d.LotID].Name))
	}
	return record.Device{}, record.Lot{}, Usage("say which with --lot LOT", "device %q is in %d lots: %s", name, len(ds), strings.Join(names, ", "))
}

// DeviceShow shows history and audit trail of one device; tempco, V/K, sets what it
// read in other sessions beside what it would have read at the first temperature.
func DeviceShow(ctx context.Context, env *Env, lot, name string, tempco record.Num) error {
	if err := checkTempco(tempco); err != nil {
		return err
	}
	d, l, err := env.findDevice(ctx, lot, name)
	if err != nil {
		return err
	}
	sheet, err := env.Sheet(ctx, l.Name, SheetOptions{ReadOnly: true})
	if err != nil {
		return err
	}
	env.doubtTempco(tempco, sheet.Part)
	f := report.DeviceFile{Lot: sheet.Lot, Device: report.Device{Device: d}, By: sheet.SortedBy, Tempco: tempco.Float()}
	timelineOf(&f, &sheet)
	for _, dev := range sheet.Devices {
		if dev.ID == d.ID {
			f.Device = dev
		}
	}
	err = env.view(ctx, func(tx *store.Tx) error {
		var err error
		if f.Changes, err = tx.Changes("device", d.ID); err != nil {
			return err
		}
		if f.Sets, err = tx.SetsOf(d.ID); err != nil {
			return err
		}
		for _, sw := range f.Device.Sweeps {
			of, err := tx.Changes("sweep", sw.ID)
			if err != nil {
				return err
			}
			f.Changes = append(f.Changes, of...)
		}
		return nil
	})
	if err != nil {
		return err
	}
	if env.JSON {
		return report.DeviceJSON(env.Out, f, sheet)
	}
	return report.DeviceHistory(env.Out, f, sheet, env.style())
}

// timelineOf fills what the device read sitting by sitting, and whether it moved by
// itself.
func timelineOf(f *report.DeviceFile, s *report.Sheet) {
	runs, _ := mostly(sittingsOf(s))
	ms := measurings(runs, f.By)
	f.Timeline = gauge.TimelineOf(ms, f.Device.Name, f.Tempco)
	if len(f.Timeline) < 2 {
		return
	}
	known, ok := s.Repeatability[f.By]
	if !ok {
		known = gauge.None()
	}
	for _, h := range gauge.HistoryOf(ms, gauge.HistoryOptions{Tempco: f.Tempco, Known: known}) {
		if text := h.Of(f.Device.Name); text != "" {
			f.History = append(f.History, text)
		}
	}
}

func (e *Env) findDevice(ctx context.Context, lot, name string) (d record.Device, l record.Lot, err error) {
	err = e.view(ctx, func(tx *store.Tx) error {
		d, l, err = deviceOf(tx, lot, name)
		return err
	})
	return d, l, err
}

// DeviceChange changes one device and keeps the old value, who, when and why.
func DeviceChange(ctx context.Context, env *Env, lot, name, reason string, change func(*record.Device)) error {
	var before, after record.Device
	err := env.update(ctx, false, func(tx *store.Tx) error {
		d, l, err := deviceOf(tx, lot, name)
		if err != nil {
			return err
		}
		before = d
		change(&d)
		after = d
		if d.Name != before.Name {
			if _, err := tx.Device(l.ID, d.Name); err == nil {
				return failed("", "device %q: already in lot %q", d.Name, l.Name)
			}
		}
		return invalid(tx.PutDevice(&d, reason))
	})
	if err != nil {
		return err
	}
	switch {
	case before.Name != after.Name:
		env.talk("device %s is now %s", report.Clean(before.Name), report.Clean(after.Name))
	case before == after:
		env.talk("device %s: nothing changed", report.Clean(name))
	case before.Excluded != after.Excluded && after.Excluded:
		env.talk("device %s is left out of every statistic; its readings are kept", report.Clean(name))
	case before.Excluded != after.Excluded:
		env.talk("device %s counts again", report.Clean(name))
	default:
		env.talk("device %s changed", report.Clean(name))
	}
	return nil
}
