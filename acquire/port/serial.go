package port

import (
	"errors"
	"fmt"
	"io/fs"
	"runtime"
	"strings"

	"go.bug.st/serial"
)

// mode translates settings for the serial library, which is asked to leave the modem
// lines alone: it refuses to open lines that have none.
func mode(s Settings) (*serial.Mode, error) {
	m := &serial.Mode{BaudRate: s.Baud, DataBits: s.DataBits}
	switch s.Parity {
	case 'O':
		m.Parity = serial.OddParity
	case 'E':
		m.Parity = serial.EvenParity
	}
	switch s.StopBits {
	case 1.5:
		m.StopBits = serial.OnePointFiveStopBits
		if runtime.GOOS != "windows" {
			return nil, fmt.Errorf("%w: 1.5 stop bits cannot be had on this system", ErrSettings)
		}
	case 2:
		m.StopBits = serial.TwoStopBits
	}
	return m, nil
}

// setModemLines feeds a lead, or not. A line without modem lines is told by the
// library's errors; it is no failure. It tells whether there are any.
func setModemLines(p serial.Port, s Settings) bool {
	if _, err := p.GetModemStatusBits(); err != nil {
		return false
	}
	dtr, rts := s.lines()
	return errors.Join(p.SetDTR(dtr), p.SetRTS(rts)) == nil
}

// openError says in this package's words why device could not be opened.
func openError(address, device string, err error) error {
	kind := ErrAbsent
	var pe *serial.PortError
	switch {
	case errors.As(err, &pe):
		switch pe.Code() {
		case serial.PortBusy:
			kind = ErrBusy
			if who := holders(device); who != "" {
				return fmt.Errorf("%s: %w: %s has it open", address, ErrBusy, who)
			}
		case serial.PermissionDenied:
			return denied(address, device)
		case serial.InvalidSpeed, serial.InvalidDataBits, serial.InvalidParity, serial.InvalidStopBits:
			kind = ErrSettings
		case serial.InvalidSerialPort:
			// The library folds the refusal of settings into this code; only its
			// text tells.
			if strings.Contains(err.Error(), "configuring port") {
				kind = ErrSettings
			}
		}
	case errors.Is(err, fs.ErrPermission):
		return denied(address, device)
	}
	return fmt.Errorf("%s: %w: %w", address, kind, err)
}
