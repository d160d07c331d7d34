package report

import "gatesill/fit/lot"

// BinRow is one row of a table of bins: one bin, or a run of empty ones.
type BinRow struct {
	Name      string // "C", "C to F"
	Low, High float64
	Devices   []lot.Placed
	Run       int // bins in the row
}

// BinRows lists the bins as people are shown them: two or more empty bins in a
// row become one, so that one device far off does not bury the others under
// empty rows. Programs get every bin.
func BinRows(srt *lot.Sorting) []BinRow {
	var list []BinRow
	for i := 0; i < len(srt.Bins); {
		b := srt.Bins[i]
		row := BinRow{Name: b.Name, Low: b.Low, High: b.High, Devices: b.Devices}
		n := 1
		if len(b.Devices) == 0 {
			for i+n < len(srt.Bins) && len(srt.Bins[i+n].Devices) == 0 {
				n++
			}
		}
		if n > 1 {
			last := srt.Bins[i+n-1]
			row.Name, row.High = b.Name+" to "+last.Name, last.High
		}
		row.Run = n
		list = append(list, row)
		i += n
	}
	return list
}

// Count tells how many devices are in the row.
func (r *BinRow) Count() string {
	if r.Run > 1 {
		return "none"
	}
	return itoa(len(r.Devices))
}
