package report

import (
	"bufio"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"

	"gatesill/fit"
	"gatesill/store/record"
)

// The CSV files are for programs: comma, decimal point, one head line, the same
// number of columns in every row, SI base units named in the heads, numbers with
// all their digits, texts always in quotes and never altered.
//
// A text that begins with = + - or @ stays as it is, because a name that came
// back changed would be another device. A spreadsheet program may run such a
// text as a formula: see [FormulaLike].

// csvRow builds one row.
type csvRow struct {
	w   *bufio.Writer
	any bool
}

func (r *csvRow) sep() {
	if r.any {
		r.w.WriteByte(',')
	}
	r.any = true
}

// text writes a text in quotes.
func (r *csvRow) text(s string) {
	r.sep()
	r.w.WriteByte('"')
	r.w.WriteString(strings.ReplaceAll(s, `"`, `""`))
	r.w.WriteByte('"')
}

// bare writes a number or nothing.
func (r *csvRow) bare(s string) {
	r.sep()
	r.w.WriteString(s)
}

func (r *csvRow) number(x float64) {
	if !isNumber(x) {
		r.bare("")
		return
	}
	r.bare(exact(x))
}

func (r *csvRow) num(n record.Num) { r.number(n.Float()) }

func (r *csvRow) end() {
	r.w.WriteByte('\n')
	r.any = false
}

// exact is the shortest decimal that reads back as x.
func exact(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }

// stem is a key without its unit: "vgsth".
func stem(k fit.Key) string { return strings.TrimSuffix(string(k), "_"+KeyOf(k).Suffix) }

// WriteDevicesCSV writes one row a device with its estimates, flags and bin.
// Every quantity has its value, its three standard uncertainties and its n:
// vgsth_V, vgsth_u_V, vgsth_u_between_V, vgsth_u_absolute_V, vgsth_n. What could
// not be had is empty, and the column why says the reason.
func WriteDevicesCSV(w io.Writer, s Sheet) error {
	b := bufio.NewWriterSize(w, 1<<16)
	r := &csvRow{w: b}
	for _, h := range []string{"lot", "part", "device", "package", "side", "date_code", "marking", "tube", "role", "state", "why"} {
		r.text(h)
	}
	for _, k := range fit.Keys {
		for _, part := range []string{"", "_u", "_u_between", "_u_absolute"} {
			r.text(stem(k) + part + "_" + KeyOf(k).Suffix)
		}
		r.text(stem(k) + "_n")
	}
	for _, h := range []string{
		"test_current_A", "idle_current_A", "method", "warnings", "flagged", "flags", "flag_text", "bin", "maybe_bin",
		"sweeps", "measured_at", "circuit", "rl_ohm", "vdd_V", "vds_V", "temp_degC", "note", "set", "set_state", "set_unit",
	} {
		r.text(h)
	}
	r.end()
	verdicts := s.Verdicts()
	bin, maybe := s.BinOf()
	in := s.InSet()
	for i := range s.Devices {
		d := &s.Devices[i]
		for _, t := range []string{s.Lot.Name, s.Part.Name, d.Name, d.Package, d.Side, d.DateCode, d.Marking, d.Tube, string(d.Role), string(d.State()), d.Reason()} {
			r.text(t)
		}
		for _, k := range fit.Keys {
			q := d.Result.At(k)
			r.number(q.Value)
			r.number(q.U)
			r.number(q.UBetween)
			r.number(q.UAbsolute)
			r.bare(itoa(q.N))
		}
		r.number(s.TestCurrent)
		r.number(s.IdleCurrent)
		r.text(d.Result.Method)
		r.text(strings.Join(deviceCodes(d), " "))
		v := verdicts[d.Name]
		r.text(yesNo(v.Flagged))
		var codes, texts []string
		for _, reason := range v.Reasons {
			codes, texts = append(codes, reason.Code), append(texts, reason.Text)
		}
		r.text(strings.Join(codes, " "))
		r.text(strings.Join(texts, " "))
		r.text(bin[d.Name])
		r.text(maybe[d.Name])
		r.bare(itoa(len(d.Sweeps)))
		at, c := "", record.Condition{}
		if len(d.Sweeps) > 0 {
			at, c = d.Sweeps[0].MeasuredAt, d.Sweeps[0].Condition
		}
		r.text(at)
		r.text(string(c.Circuit))
		r.num(c.RL)
		r.num(c.VDD)
		r.num(c.VDS)
		r.num(c.Temp)
		r.text(d.Note)
		set := in[d.ID]
		if set == nil {
			set = &record.Set{}
		}
		r.text(set.Name)
		r.text(string(set.State))
		r.text(set.Unit)
		r.end()
	}
	return b.Flush()
}

func yesNo(yes bool) string {
	if yes {
		return "yes"
	}
	return "no"
}

// Marks of a reading without a number, as they stand in a points file.
const (
	overloadMark  = "OL"
	underloadMark = "-OL"
)

// WritePointsCSV writes one row a point, sweep after sweep, so that the file can
// be imported again: device, sweep, direction, point (from 1), then every
// quantity that any sweep of the lot has, with the decimals that were read. A
// reading beyond the meter's range is OL (-OL below it), a missing one is empty;
// left_out holds the code of a point that the fit did not use. The conditions of
// the sweeps are not in it, because the columns are readings: they stand in
// [WriteDevicesCSV] and [WriteJSON], and are given again when the file is
// imported.
func WritePointsCSV(w io.Writer, s Sheet) error {
	b := bufio.NewWriterSize(w, 1<<16)
	r := &csvRow{w: b}
	present := map[record.Quantity]bool{}
	packages := false
	for i := range s.Devices {
		packages = packages || s.Devices[i].Package != "" || s.Devices[i].Side != ""
		for j := range s.Devices[i].Sweeps {
			for _, c := range columnsOf(&s.Devices[i].Sweeps[j]) {
				present[c.Quantity] = true
			}
		}
	}
	var shown []record.Quantity
	for _, q := range record.Quantities {
		if present[q] {
			shown = append(shown, q)
		}
	}
	r.text("device")
	if packages {
		r.text("package")
		r.text("side")
	}
	for _, h := range []string{"sweep", "direction", "date", "point"} {
		r.text(h)
	}
	for _, q := range shown {
		r.text(headOf(q))
	}
	r.text("left_out")
	r.end()
	for i := range s.Devices {
		d := &s.Devices[i]
		for j := range d.Sweeps {
			if err := writePoints(r, d, &d.Sweeps[j], shown, packages); err != nil {
				return err
			}
		}
	}
	return b.Flush()
}

func writePoints(r *csvRow, d *Device, sw *Sweep, shown []record.Quantity, packages bool) error {
	cols := columnsOf(sw)
	texts := make([][]string, len(shown))
	n := 0
	for k, q := range shown {
		for c := range cols {
			if cols[c].Quantity != q {
				continue
			}
			texts[k] = decimals(&cols[c])
			for i, x := range cols[c].Values {
				if math.IsInf(x, 1) {
					texts[k][i] = overloadMark
				} else if math.IsInf(x, -1) {
					texts[k][i] = underloadMark
				}
			}
			if n != 0 && len(texts[k]) != n {
				return fmt.Errorf("device %q: sweep %s: column %s has %d points, the others %d", d.Name, sw.ID, headOf(q), len(texts[k]), n)
			}
			n = len(texts[k])
		}
	}
	for _, m := range sw.Marks {
		for k, q := range shown {
			if q == m.Quantity && m.Index >= 0 && m.Index < len(texts[k]) {
				texts[k][m.Index] = stateMark(m.State)
			}
		}
	}
	left := make([]string, n)
	for _, l := range sw.Result.LeftOut {
		if l.Index >= 0 && l.Index < n {
			left[l.Index] = l.Code
		}
	}
	for i := range n {
		r.text(d.Name)
		if packages {
			r.text(d.Package)
			r.text(d.Side)
		}
		r.text(sw.ID)
		r.text(string(sw.Direction))
		r.text(sw.MeasuredAt)
		r.bare(itoa(i + 1))
		for k := range shown {
			if texts[k] == nil {
				r.bare("")
			} else {
				r.bare(texts[k][i])
			}
		}
		r.text(left[i])
		r.end()
	}
	return nil
}

func stateMark(s record.PointState) string {
	switch s {
	case record.Overload:
		return overloadMark
	case record.Underload:
		return underloadMark
	}
	return ""
}

// FormulaLike lists the texts of a sheet that a spreadsheet program may take
// for a formula when it opens a CSV file: they begin with = + - @, a tab or a
// line break. Whoever writes a CSV file for people should warn of them.
func FormulaLike(s Sheet) []string {
	var list []string
	look := func(texts ...string) {
		for _, t := range texts {
			if t != "" && strings.ContainsRune("=+-@\t\r\n", rune(t[0])) {
				list = append(list, t)
			}
		}
	}
	look(s.Lot.Name, s.Part.Name)
	for i := range s.Devices {
		d := &s.Devices[i]
		look(d.Name, d.Package, d.DateCode, d.Marking, d.Tube, d.Note, d.Device.Why)
	}
	return list
}
