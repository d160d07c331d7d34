package port

import "time"

// Settings of a serial line.
type Settings struct {
	Baud     int
	DataBits int
	Parity   byte    // 'N', 'O', 'E'
	StopBits float64 // 1, 1.5, 2
	DTR, RTS *bool   // nil: DTR high, RTS low, which feeds opto-coupled leads
}

// ByteTime is how long one byte takes at these settings, 0 without a baud rate.
func (s Settings) ByteTime() time.Duration {
	if s.Baud <= 0 {
		return 0
	}
	bits := 1 + float64(s.DataBits) + s.StopBits
	if s.Parity != 'N' && s.Parity != 0 {
		bits++
	}
	return time.Duration(bits / float64(s.Baud) * float64(time.Second))
}
