package port

import (
	"path/filepath"
	"strings"

	"golang.org/x/sys/unix"
)

// list looks below root for call-out devices: their twins named tty.* wait for a
// carrier that no meter gives.
func list(root string) ([]Found, error) {
	names, err := filepath.Glob(filepath.Join(root, "dev/cu.*"))
	if err != nil {
		return nil, err
	}
	var found []Found
	for _, n := range names {
		switch strings.TrimPrefix(filepath.Base(n), "cu.") {
		case "Bluetooth-Incoming-Port", "debug-console", "wlan-debug": // of the computer itself; from memory
			continue
		}
		o := ownershipOf(n)
		f := Found{Address: n, Device: n, Kind: kindSerial, Group: o.group}
		if err := unix.Access(n, unix.R_OK|unix.W_OK); err != nil {
			f.Access = deniedText(n, o)
		}
		found = append(found, f)
	}
	return found, nil
}
