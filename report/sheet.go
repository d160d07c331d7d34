// Package report lays out what is known of a lot: tables for the terminal,
// CSV and JSON for programs; its subpackages draw plots and write the page.
//
// It computes no results, reads no store, and writes no number without its
// unit. SI prefixes are used here and nowhere deeper.
package report

import (
	"gatesill/fit"
	"gatesill/fit/compare"
	"gatesill/fit/gauge"
	"gatesill/fit/lot"
	"gatesill/store/record"
)

// Sheet is everything that is known of one lot, ready to be laid out. The job
// that fills it decides nothing.
type Sheet struct {
	Part     record.Part
	Lot      record.Lot
	Sources  []record.Source
	Sessions []record.Session
	Devices  []Device     // every device of the lot, dead and excluded ones too, in natural order of their names
	Sets     []record.Set // with a device of the lot, by number; released ones too

	SortedBy    fit.Key // quantity that sorting uses
	TestCurrent float64 // A, at which Vgsth was taken; NaN when there is none
	TestBasis   string  // where it came from: "part", "--at", "spot list", "default"
	IdleCurrent float64 // A; NaN: the part has none

	Shape *fit.LotShape // of the lot's curves, which devices with too few points were read along; nil: none
	// Repeatability of the bench by quantity, which no u of a device is below; nil: not
	// known. It is that of this lot or of another of the part on the same bench.
	Repeatability map[fit.Key]gauge.Repeatability

	Budget bool // the results hold how their uncertainties come about, and that is shown

	Spread lot.Spread
	Spec   *lot.Specification // nil: the part has no limits

	GuardSetAt, SendBackSetAt string         // when the lot's guard band and its rule to send back were set last, stamps as of [record.Stamp]; "": never
	IdleSetAt                 string         // when the idle current of the part was set last, else the part; a stamp, "": not known
	Sorting                   *lot.Sorting   // nil: not sorted
	Compared                  *Compared      // nil: not compared with another lot
	Trend                     *compare.Trend // the lots of the part in the order of time; nil: not gathered
	Version                   string         // of the program
	Hash                      string         // SHA-256 over the canonical data, hex
	Latest                    string         // latest time stamp in the data: the page has no present time

	Codes []fit.CodeInfo // explains the warning codes; nil: they are shown without advice
}

// Compared is the lot of a sheet, as the candidate, against a reference lot.
type Compared struct {
	Reference *Sheet
	compare.Comparison
	MarginFrom string // where the margin comes from and how it became volts, in words; "" none
}

// ComparedLots is one lot or several against a reference lot.
type ComparedLots struct {
	Reference  *Sheet
	Candidates []Sheet        // each with Compared, in the order asked for
	Trend      *compare.Trend // of all lots, the reference among them; nil with one candidate
}

// Verdicts gives the verdict of the spread on each device, by name.
func (s *Sheet) Verdicts() map[string]lot.Verdict {
	m := make(map[string]lot.Verdict, len(s.Spread.Devices))
	for _, v := range s.Spread.Devices {
		m[v.Name] = v
	}
	return m
}

// Counts is how many devices of a lot are in which state.
type Counts struct {
	Devices  int // all that are known
	Measured int // with a value, excluded and control ones aside
	Flagged  int
	Control  int
	State    map[fit.State]int // all devices; "" for those without a sweep
}

// Counts counts the devices of the sheet.
func (s *Sheet) Counts() Counts {
	c := Counts{Devices: len(s.Devices), State: map[fit.State]int{}}
	for _, d := range s.Devices {
		c.State[d.State()]++
		switch {
		case d.Role == record.Control:
			c.Control++
		case d.State() == fit.Measured:
			c.Measured++
		}
	}
	for _, v := range s.Spread.Devices {
		if v.Flagged {
			c.Flagged++
		}
	}
	return c
}

// BinOf gives the bin of each sorted device, and the bin across the edge that
// it may belong to as well.
func (s *Sheet) BinOf() (bin, maybe map[string]string) {
	bin, maybe = map[string]string{}, map[string]string{}
	if s.Sorting == nil {
		return bin, maybe
	}
	for _, b := range s.Sorting.Bins {
		for _, p := range b.Devices {
			bin[p.Name] = b.Name
			if p.Maybe != "" {
				maybe[p.Name] = p.Maybe
			}
		}
	}
	return bin, maybe
}

// InSet gives the set, not released, that each device is in, by the device's id.
func (s *Sheet) InSet() map[string]*record.Set {
	in := map[string]*record.Set{}
	for i := range s.Sets {
		for _, m := range s.Sets[i].Members {
			if s.Sets[i].State != record.Released {
				in[m.DeviceID] = &s.Sets[i]
			}
		}
	}
	return in
}

// Device is one device with its sweeps and what was made of them.
type Device struct {
	record.Device
	Result fit.Result // over its sweeps; State Excluded when it is excluded
	Sweeps []Sweep
}

// Sweep is one sweep with its own result.
type Sweep struct {
	record.Sweep
	SourceName string
	Result     fit.Result
	Curve      fit.Curve // as handed to the fit, left-out points still in it
}
