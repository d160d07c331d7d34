package port

import (
	"cmp"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"golang.org/x/sys/unix"
)

// list looks below root, which is / but in tests.
func list(root string) ([]Found, error) {
	root, err := filepath.EvalSymlinks(root) // as the names that links lead to are
	if err != nil {
		return nil, err
	}
	dev := filepath.Join(root, "dev")
	if _, err := os.Stat(dev); err != nil {
		return nil, err
	}
	byID := linksTo(filepath.Join(dev, "serial/by-id"))
	byPath := linksTo(filepath.Join(dev, "serial/by-path"))

	devices := map[string]string{} // device -> kind
	for device := range byID {
		devices[device] = kindSerial
	}
	for device := range byPath {
		devices[device] = kindSerial
	}
	for pattern, kind := range map[string]string{"ttyUSB*": kindSerial, "ttyACM*": kindSerial, "usbtmc*": kindTMC} {
		names, err := filepath.Glob(filepath.Join(dev, pattern))
		if err != nil {
			return nil, err
		}
		for _, n := range names {
			devices[n] = kind
		}
	}

	// One identity on several devices: the by-id name points to any one of them, and
	// to another one after the next plugging in.
	alike := map[string]int{}
	for device := range devices {
		if id := identity(root, device); id != "" {
			alike[id]++
		}
	}
	var found []Found
	for device, kind := range devices {
		f := Found{Device: device, Kind: kind, Shared: alike[identity(root, device)] > 1}
		names := append(slices.Clone(byID[device]), byPath[device]...)
		if f.Shared || len(byID[device]) == 0 {
			names = append(slices.Clone(byPath[device]), byID[device]...)
		}
		names = append(names, device)
		f.Address, f.Other = names[0], names[1:]
		if f.Shared && len(byPath[device]) == 0 {
			f.Address, f.Other = device, names[:len(names)-1]
		}
		o := ownershipOf(device)
		f.Group = o.group
		if err := unix.Access(device, unix.R_OK|unix.W_OK); err != nil {
			f.Access = deniedText(device, o)
		}
		found = append(found, f)
	}
	slices.SortFunc(found, func(a, b Found) int { return cmp.Compare(a.Address, b.Address) })
	return found, nil
}

// linksTo gives the names in a folder of links, by what they point to. Links to
// serial ports of the computer itself are left out.
func linksTo(folder string) map[string][]string {
	names := map[string][]string{}
	entries, _ := os.ReadDir(folder) // sorted; missing when nothing is plugged in
	for _, e := range entries {
		name := filepath.Join(folder, e.Name())
		to, err := filepath.EvalSymlinks(name)
		if err != nil || isBuiltIn(filepath.Base(to)) {
			continue
		}
		names[to] = append(names[to], name)
	}
	return names
}

// isBuiltIn tells names like ttyS0.
func isBuiltIn(name string) bool {
	number, ok := strings.CutPrefix(name, "ttyS")
	return ok && strings.Trim(number, "0123456789") == ""
}

// identity is what a USB adapter says of itself: maker, model, serial number, and
// which of its interfaces the device belongs to. "" where it says nothing.
func identity(root, device string) string {
	at, err := filepath.EvalSymlinks(filepath.Join(root, "sys/class/tty", filepath.Base(device), "device"))
	if err != nil {
		return ""
	}
	number := ""
	for top := filepath.Join(root, "sys"); len(at) > len(top); at = filepath.Dir(at) {
		if number == "" {
			number = attribute(at, "bInterfaceNumber")
		}
		if maker := attribute(at, "idVendor"); maker != "" {
			return strings.Join([]string{maker, attribute(at, "idProduct"), attribute(at, "serial"), number}, ":")
		}
	}
	return ""
}

func attribute(folder, name string) string {
	b, _ := os.ReadFile(filepath.Join(folder, name)) // of sysfs: no device is touched
	return strings.TrimSpace(string(b))
}
