package port

import (
	"fmt"
	"path/filepath"
	"runtime"
	"strings"
)

// ownership is who may open a device, as far as it could be found out.
type ownership struct {
	group  string // of the device; "" not known
	member bool   // the user is in that group by the user list
	active bool   // this process has the group
}

// deniedText says what stands in the way and what helps on Linux, or elsewhere just
// the former.
func deniedText(device string, o ownership) string {
	if runtime.GOOS != "linux" {
		return fmt.Sprintf("%s belongs to the group %q", device, o.group)
	}
	var b strings.Builder
	name := filepath.Base(device)
	switch {
	case o.group == "":
		fmt.Fprintf(&b, "%s may not be opened, and its group could not be found out", device)
	case o.group == "root" || o.group == "wheel":
		// Joining these gives far more than a device.
		fmt.Fprintf(&b, "%s belongs to the group %s, which is not for users", device, o.group)
	case o.active:
		fmt.Fprintf(&b, "%s belongs to the group %s, which you are in, but the group has no right to read and write it", device, o.group)
	case o.member:
		fmt.Fprintf(&b, "%s belongs to the group %s, which you are in, but not yet in this session: log out and in again", device, o.group)
		return b.String()
	default:
		fmt.Fprintf(&b, "%s belongs to the group %s, which you are not in: sudo usermod -aG %s $USER, then log out and in again", device, o.group, o.group)
	}
	match := fmt.Sprintf(`SUBSYSTEM=="tty", KERNEL=="%s*"`, strings.TrimRight(name, "0123456789"))
	if strings.HasPrefix(name, "usbtmc") {
		match = `SUBSYSTEM=="usbmisc", KERNEL=="usbtmc*"`
	}
	// The number of the file matters: rules that give seats their rights run as 73.
	fmt.Fprintf(&b, "; or, for whoever sits at this computer, a file /etc/udev/rules.d/70-meters.rules with the line %s, TAG+=\"uaccess\"", match)
	return b.String()
}

func denied(address, device string) error {
	return fmt.Errorf("%s: %w: %s", address, ErrDenied, deniedText(device, ownershipOf(device)))
}
