package fit

// What the gate voltage of a power part at a constant current usually changes by as it
// warms up, V/K, as magnitudes: less of it where the current is large.
const (
	UsualSlopeLow  = 2e-3
	UsualSlopeHigh = 8e-3
)

// UsualSlope says the same in words.
const UsualSlope = "-2 to -8 mV/K (typical, common practice, no source)"
