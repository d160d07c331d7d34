package port

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"golang.org/x/sys/unix"
)

// A fake /dev of named pipes: opening one of them for reading would block for ever,
// so that a list that opens anything never comes back.
func fakeRoot(t *testing.T, devices []string, links, files map[string]string) string {
	t.Helper()
	root := t.TempDir()
	make := func(path string) string {
		full := filepath.Join(root, path)
		if err := os.MkdirAll(filepath.Dir(full), 0o755); err != nil {
			t.Fatal(err)
		}
		return full
	}
	for _, d := range devices {
		if err := unix.Mkfifo(make("dev/"+d), 0o660); err != nil {
			t.Fatal(err)
		}
	}
	for name, to := range links {
		if err := os.Symlink(to, make(name)); err != nil {
			t.Fatal(err)
		}
	}
	for name, text := range files {
		if err := os.WriteFile(make(name), []byte(text+"\n"), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	return root
}

func listed(t *testing.T, root string) string {
	t.Helper()
	found, err := list(root)
	if err != nil {
		t.Fatal(err)
	}
	var b strings.Builder
	for _, f := range found {
		fmt.Fprintf(&b, "%s = %s, also %v, %s", f.Address, f.Device, f.Other, f.Kind)
		if f.Shared {
			b.WriteString(", shared")
		}
		b.WriteString("\n")
	}
	real, err := filepath.EvalSymlinks(root)
	if err != nil {
		t.Fatal(err)
	}
	return strings.ReplaceAll(b.String(), real, "")
}

func TestList(t *testing.T) {
	root := fakeRoot(t, []string{"ttyS0", "ttyS1", "ttyUSB0", "ttyUSB1", "ttyACM0", "ttyAMA0", "usbtmc0", "tty1", "null"}, map[string]string{
		"dev/serial/by-id/usb-lead_A1-if00":   "../../ttyUSB1",
		"dev/serial/by-path/pci-0:1":          "../../ttyUSB1",
		"dev/serial/by-path/pci-0:2":          "../../ttyUSB0",
		"dev/serial/by-path/platform-serial0": "../../ttyS0",
		"dev/serial/by-id/gone":               "../../ttyUSB9",
	}, nil)
	want := `/dev/serial/by-id/usb-lead_A1-if00 = /dev/ttyUSB1, also [/dev/serial/by-path/pci-0:1 /dev/ttyUSB1], serial
/dev/serial/by-path/pci-0:2 = /dev/ttyUSB0, also [/dev/ttyUSB0], serial
/dev/ttyACM0 = /dev/ttyACM0, also [], serial
/dev/usbtmc0 = /dev/usbtmc0, also [], usbtmc
`
	if got := listed(t, root); got != want {
		t.Errorf("got\n%s", got)
	}
}

// Two adapters with one serial number: their one by-id name leads to either.
func TestListOffersThePlaceOfAdaptersThatShareAName(t *testing.T) {
	usb := func(n, serial string) map[string]string {
		at := "sys/devices/usb1/" + n + "/"
		return map[string]string{at + "idVendor": "1a86", at + "idProduct": "7523", at + "serial": serial, at + n + ":1.0/bInterfaceNumber": "00"}
	}
	files := map[string]string{}
	for _, m := range []map[string]string{usb("1-1", "0001"), usb("1-2", "0001"), usb("1-3", "0002")} {
		for k, v := range m {
			files[k] = v
		}
	}
	root := fakeRoot(t, []string{"ttyUSB0", "ttyUSB1", "ttyUSB2"}, map[string]string{
		"dev/serial/by-id/usb-lead_0001-if00": "../../ttyUSB1",
		"dev/serial/by-id/usb-lead_0002-if00": "../../ttyUSB2",
		"dev/serial/by-path/p1":               "../../ttyUSB0",
		"dev/serial/by-path/p2":               "../../ttyUSB1",
		"dev/serial/by-path/p3":               "../../ttyUSB2",
		"sys/class/tty/ttyUSB0/device":        "../../../devices/usb1/1-1/1-1:1.0/ttyUSB0",
		"sys/class/tty/ttyUSB1/device":        "../../../devices/usb1/1-2/1-2:1.0/ttyUSB1",
		"sys/class/tty/ttyUSB2/device":        "../../../devices/usb1/1-3/1-3:1.0/ttyUSB2",
	}, files)
	for i, n := range []string{"1-1", "1-2", "1-3"} {
		if err := os.MkdirAll(filepath.Join(root, "sys/devices/usb1", n, n+":1.0", fmt.Sprintf("ttyUSB%d", i)), 0o755); err != nil {
			t.Fatal(err)
		}
	}
	want := `/dev/serial/by-id/usb-lead_0002-if00 = /dev/ttyUSB2, also [/dev/serial/by-path/p3 /dev/ttyUSB2], serial
/dev/serial/by-path/p1 = /dev/ttyUSB0, also [/dev/ttyUSB0], serial, shared
/dev/serial/by-path/p2 = /dev/ttyUSB1, also [/dev/serial/by-id/usb-lead_0001-if00 /dev/ttyUSB1], serial, shared
`
	if got := listed(t, root); got != want {
		t.Errorf("got\n%s", got)
	}
}

func TestListOfThisComputer(t *testing.T) {
	found, err := List()
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range found {
		if isBuiltIn(filepath.Base(f.Device)) || f.Address == "" {
			t.Errorf("%+v", f)
		}
	}
}

func TestDeniedText(t *testing.T) {
	for _, x := range []struct {
		device   string
		o        ownership
		has, not []string
	}{
		{"/dev/ttyUSB0", ownership{group: "dialout"},
			[]string{"/dev/ttyUSB0", "group dialout", "not in", "sudo usermod -aG dialout $USER", "log out and in", "70-", `KERNEL=="ttyUSB*"`, `TAG+="uaccess"`}, nil},
		{"/dev/ttyUSB0", ownership{group: "dialout", member: true}, []string{"you are in", "log out and in"}, []string{"usermod"}},
		{"/dev/ttyUSB0", ownership{group: "dialout", member: true, active: true}, []string{"no right", "uaccess"}, []string{"usermod"}},
		{"/dev/usbtmc0", ownership{group: "root"}, []string{"not for users", `KERNEL=="usbtmc*"`, "uaccess"}, []string{"usermod"}},
		{"/dev/ttyACM12", ownership{}, []string{"/dev/ttyACM12", `KERNEL=="ttyACM*"`}, []string{"usermod"}},
	} {
		text := deniedText(x.device, x.o)
		for _, h := range x.has {
			if !strings.Contains(text, h) {
				t.Errorf("%+v: no %q in %s", x.o, h, text)
			}
		}
		for _, n := range x.not {
			if strings.Contains(text, n) {
				t.Errorf("%+v: %q in %s", x.o, n, text)
			}
		}
	}
}
