package acquire

// Order is what a [Runner] asks its caller to do. Orders are carried out in the
// sequence in which they come.
type Order interface{ order() }

// SetGate asks the keeper for a gate voltage. It is never beyond the limit of
// V_GS, and never comes after an [Off].
type SetGate struct{ V float64 }

// SwitchDrain asks the keeper to switch the drain supply.
type SwitchDrain struct{ On bool }

// Off asks the keeper for the off state. It is the last order of a sweep with
// supplies, and after a stop; it may come a second time with CurrentGone once fresh
// readings say so, so that the gate's output can be opened.
type Off struct {
	Reason      string
	CurrentGone bool // the drain current was below 1 mA in fresh readings
}

// Say is one line for the operator.
type Say struct{ Text string }

// Sound is a short signal.
type Sound string

// The sounds.
const (
	SoundNone      Sound = ""
	SoundAccept    Sound = "accept"
	SoundStop      Sound = "stop"
	SoundAttention Sound = "attention"
)

// Beep asks for a sound.
type Beep struct{ Sound Sound }

// Taken hands over a point of the sweep.
type Taken struct {
	Point  Point
	Return bool    // the return reading: a low-power point taken again after the sweep
	Early  bool    // of a spot: taken on a key before it had settled
	Slope  float64 // of a spot: A/V, how the current went with the gate voltage near it; 0 not known
}

// Undone takes back the last N points.
type Undone struct{ N int }

// Rescaled says that readings of a role count by a factor from now on, because its
// meter says the wrong prefix. The readings themselves stay as they are.
type Rescaled struct {
	Role   string
	Factor float64
}

// Noted is something for the record of the session: a limit reached, a meter
// silent. Kind is one word, as of record.Event.
type Noted struct{ Kind, Text string }

// Done ends the sweep; it comes once. Readings may still be handed in, so that a
// second [Off] and the view stay right.
type Done struct {
	Why      string
	Complete bool // the sweep reached its end, return reading included
	Skipped  bool // the operator skipped the device; Why is his reason
}

func (SetGate) order()     {}
func (SwitchDrain) order() {}
func (Off) order()         {}
func (Say) order()         {}
func (Beep) order()        {}
func (Taken) order()       {}
func (Undone) order()      {}
func (Rescaled) order()    {}
func (Noted) order()       {}
func (Done) order()        {}

// KeyName is what the operator wants.
type KeyName string

// The keys.
const (
	KeyAccept KeyName = "accept" // take what stands now; go on where the sweep waits for a hand
	KeyFinish KeyName = "finish" // enough points: on to the return reading
	KeyStop   KeyName = "stop"   // end at once; supplies to the off state
	KeySkip   KeyName = "skip"   // leave this device, with a reason
	KeyRepeat KeyName = "repeat" // this sweep again from its beginning
	KeyUndo   KeyName = "undo"   // the last point does not count
	KeyFix    KeyName = "fix"    // the prefix of the current meter is as proposed
)

// Key is one key of the operator.
type Key struct {
	Name   KeyName
	Reason string // of a skip
}
