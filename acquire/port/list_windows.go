//go:build windows

package port

import (
	"slices"

	"go.bug.st/serial"
)

// list asks the library, which on Windows reads names from the registry and opens
// nothing (read in its source, version 1.8.0).
func list(string) ([]Found, error) {
	names, err := serial.GetPortsList()
	if err != nil {
		return nil, err
	}
	slices.Sort(names)
	var found []Found
	for _, n := range names {
		found = append(found, Found{Address: n, Device: n, Kind: kindSerial})
	}
	return found, nil
}
