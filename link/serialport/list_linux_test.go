package serialport

import (
	"os"
	"path/filepath"
	"testing"

	"github.com/google/go-cmp/cmp"
)

// tree makes files from path → text; text that begins with "-> " is a link.
func tree(t *testing.T, files map[string]string) string {
	t.Helper()
	root := t.TempDir()
	for name, text := range files {
		path := filepath.Join(root, name)
		if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
			t.Fatal(err)
		}
		var err error
		if to, isLink := trimPrefix(text, "-> "); isLink {
			err = os.Symlink(to, path)
		} else {
			err = os.WriteFile(path, []byte(text), 0o644)
		}
		if err != nil {
			t.Fatal(err)
		}
	}
	return root
}

func trimPrefix(s, p string) (string, bool) {
	if len(s) >= len(p) && s[:len(p)] == p {
		return s[len(p):], true
	}
	return s, false
}

// The layout is that of the kernel's ABI documents (sysfs-class-tty, USB
// attributes idVendor, idProduct, serial, product); names and numbers are made
// up for the test.
func TestListReadsWhatTheKernelSays(t *testing.T) {
	usb := "sys/devices/pci0/usb1/1-2/"
	root := tree(t, map[string]string{
		usb + "idVendor": "1d50\n", usb + "idProduct": "60AB\n", usb + "serial": "R\x1b[31m17\n",
		usb + "manufacturer": "Bench\n", usb + "product": "Motor board\n",
		usb + "1-2:1.0/tty/ttyACM0/dev": "166:0\n",
		"sys/class/tty/ttyACM0/dev":     "166:0\n",
		"sys/class/tty/ttyACM0/device":  "-> ../../../devices/pci0/usb1/1-2/1-2:1.0",
		"sys/devices/plat/serial0/uart": "",
		"sys/class/tty/ttyS0/type":      "4\n", "sys/class/tty/ttyS0/device": "-> ../../../devices/plat/serial0",
		"sys/class/tty/ttyS1/type": "0\n", "sys/class/tty/ttyS1/device": "-> ../../../devices/plat/serial0",
		"sys/class/tty/tty0/dev":               "4:0\n",
		"dev/ttyACM0":                          "",
		"dev/serial/by-id/usb-Bench_R17-if00":  "-> ../../ttyACM0",
		"dev/serial/by-id/usb-gone_board-if00": "-> ../../ttyUSB9",
	})
	got, err := listUnder(root)
	if err != nil {
		t.Fatal(err)
	}
	want := []Info{
		{Path: "/dev/ttyACM0", ByID: "/dev/serial/by-id/usb-Bench_R17-if00", USB: true, VID: "1d50", PID: "60AB",
			Serial: "R\x1b[31m17", Manufacturer: "Bench", Product: "Motor board"},
		{Path: "/dev/ttyS0"}, // ttyS1 is an empty slot, tty0 a virtual console
	}
	if diff := cmp.Diff(want, got); diff != "" {
		t.Error(diff)
	}
}

func TestListOfThisMachineIsSortedAndPrintable(t *testing.T) {
	ports, err := List()
	if err != nil {
		t.Skip(err)
	}
	for i, p := range ports {
		if i > 0 && p.USB && !ports[i-1].USB {
			t.Errorf("%s is USB and comes after %s", p.Path, ports[i-1].Path)
		}
		if p.Path == "" || p.Serial != printable(p.Serial) {
			t.Errorf("port %+v", p)
		}
	}
}

func TestPortsSortByNumber(t *testing.T) {
	for _, c := range [][2]string{{"/dev/ttyUSB2", "/dev/ttyUSB10"}, {"/dev/ttyACM9", "/dev/ttyUSB0"}, {"COM3", "COM12"}} {
		if !lessNumbered(c[0], c[1]) || lessNumbered(c[1], c[0]) {
			t.Errorf("%s must come before %s", c[0], c[1])
		}
	}
}
