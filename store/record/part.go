package record

import "fmt"

// Part is the type of a transistor: what holds for every lot of it.
type Part struct {
	ID      string // UUIDv7
	Name    string
	Channel Channel
	Mode    Mode

	OffVoltage  Num // V, gate to source, at which the device is surely off; unknown: 0 for enhancement
	TestCurrent Num // A, magnitude, at which the data sheet states V_GS(th)
	TestVDS     Num // V, at which it states it; unknown: drain tied to gate
	IdleCurrent Num // A, magnitude, idle (quiescent) current wanted
	VgsthMin    Num // V, data-sheet limits of V_GS(th), signed
	VgsthMax    Num // V
	MaxVgs      Num // V, magnitude
	MaxVds      Num // V, magnitude
	MaxID       Num // A, magnitude
	MaxPD       Num // W
	MaxTemp     Num // deg C, junction
	Rth         Num // K/W, junction to case
	Note        string
}

// NewPart returns an n-channel enhancement part of that name, all numbers
// unknown.
func NewPart(name string) Part {
	return Part{Name: name, Channel: NChannel, Mode: Enhancement}
}

// Sign is +1 for an n-channel part and -1 for a p-channel part.
func (p Part) Sign() float64 {
	if p.Channel == PChannel {
		return -1
	}
	return 1
}

// Validate says what is wrong with the part, wrapping [ErrInvalid].
func (p Part) Validate() error {
	if err := CheckName("part", p.Name); err != nil {
		return err
	}
	if p.Channel != NChannel && p.Channel != PChannel {
		return fmt.Errorf("part %q: channel %q is neither n nor p: %w", p.Name, p.Channel, ErrInvalid)
	}
	if p.Mode != Enhancement && p.Mode != Depletion {
		return fmt.Errorf("part %q: mode %q is neither enhancement nor depletion: %w", p.Name, p.Mode, ErrInvalid)
	}
	for _, q := range []struct {
		name string
		n    Num
	}{
		{"test current", p.TestCurrent}, {"idle current", p.IdleCurrent}, {"max V_GS", p.MaxVgs},
		{"max V_DS", p.MaxVds}, {"max I_D", p.MaxID}, {"max P_D", p.MaxPD}, {"R_th", p.Rth},
	} {
		if x, ok := q.n.Get(); ok && x <= 0 {
			return fmt.Errorf("part %q: %s is %g, must be above 0 (a magnitude, also for a p-channel part): %w", p.Name, q.name, x, ErrInvalid)
		}
	}
	lo, okLo := p.VgsthMin.Get()
	hi, okHi := p.VgsthMax.Get()
	if okLo && okHi && lo > hi {
		return fmt.Errorf("part %q: lower V_GS(th) limit %g V is above the upper one %g V: %w", p.Name, lo, hi, ErrInvalid)
	}
	if v, ok := p.OffVoltage.Get(); ok {
		if m, known := p.MaxVgs.Get(); known && (v > m || v < -m) {
			return fmt.Errorf("part %q: off voltage %g V is beyond the greatest V_GS of %g V: %w", p.Name, v, m, ErrInvalid)
		}
	}
	return nil
}

// Lot is a quantity of one part that came together.
type Lot struct {
	ID     string // UUIDv7
	Name   string
	PartID string

	Supplier string
	DateCode string
	Marking  string
	Quantity Num    // parts in the lot, not those measured; unknown if not counted
	Sampled  string // how the sample was taken, in words

	Margin       Amount // largest shift that does not matter: V, % (of the idle current) or A; zero: none set
	MarginSetAt  string // when Margin was set last, stamp as of [Stamp]
	Guard        Amount // guard band at a limit: V, or u (multiples of the standard uncertainty)
	SendBack     string // "", "outside-limits" or "outside-margin": the user's own rule
	DecidedAt    string // when Guard or SendBack was set last
	Note         string
	CreatedAt    string
	DevicesCount int // devices known of it; filled by listings only
	SweepsCount  int // sweeps known of it; filled by listings only
}

// Validate says what is wrong with the lot, wrapping [ErrInvalid].
func (l Lot) Validate() error {
	if err := CheckName("lot", l.Name); err != nil {
		return err
	}
	if q, ok := l.Quantity.Get(); ok && (q < 1 || q != float64(int64(q))) {
		return fmt.Errorf("lot %q: quantity %g is not a whole number above 0: %w", l.Name, q, ErrInvalid)
	}
	switch l.Margin.Unit {
	case "", "V", "%", "A":
	default:
		return fmt.Errorf("lot %q: margin in %q, must be in V, %% or A: %w", l.Name, l.Margin.Unit, ErrInvalid)
	}
	if l.Margin.Unit != "" && l.Margin.Value <= 0 {
		return fmt.Errorf("lot %q: margin %s must be above 0: %w", l.Name, l.Margin, ErrInvalid)
	}
	switch l.Guard.Unit {
	case "", "V", "u":
	default:
		return fmt.Errorf("lot %q: guard band in %q, must be in V or u: %w", l.Name, l.Guard.Unit, ErrInvalid)
	}
	if l.Guard.Value < 0 {
		return fmt.Errorf("lot %q: guard band %s is negative: %w", l.Name, l.Guard, ErrInvalid)
	}
	switch l.SendBack {
	case "", "outside-limits", "outside-margin":
	default:
		return fmt.Errorf("lot %q: send-back rule %q, must be outside-limits or outside-margin: %w", l.Name, l.SendBack, ErrInvalid)
	}
	return nil
}

// Device is one transistor of a lot.
type Device struct {
	ID        string // UUIDv7
	LotID     string
	Name      string // its serial, unique in the lot
	PackageID string // package it sits in, "" for a package of its own
	Package   string // name of that package; filled by queries
	Side      string // "A" or "B" of a package with two devices, else ""
	DateCode  string
	Marking   string
	Tube      string // tube, tray or reel it came in
	Role      Role
	Excluded  bool // left out of every statistic
	Why       string
	Note      string
	CreatedAt string
}

// Validate says what is wrong with the device, wrapping [ErrInvalid].
func (d Device) Validate() error {
	if err := CheckName("device", d.Name); err != nil {
		return err
	}
	if d.Side != "" && d.Side != "A" && d.Side != "B" {
		return fmt.Errorf("device %q: side %q is neither A nor B: %w", d.Name, d.Side, ErrInvalid)
	}
	if d.Role != Sample && d.Role != Control {
		return fmt.Errorf("device %q: role %q is neither sample nor control: %w", d.Name, d.Role, ErrInvalid)
	}
	return nil
}

// Change is one entry of the audit trail: what was changed, from what to what,
// by whom, when and why.
type Change struct {
	At      string // stamp as of [Stamp]
	Who     string
	What    string // "part", "lot", "device", "sweep", "set"
	ID      string // UUID of the thing changed
	Field   string // field name, or "created"
	Old     string
	New     string
	Reason  string
	Subject string // name of the thing changed; filled by queries
}
