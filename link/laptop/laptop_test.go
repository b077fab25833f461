package laptop

import (
	"errors"
	"math"
	"strings"
	"testing"
	"testing/fstest"
)

// Names and words of the files are those of Linux,
// Documentation/ABI/testing/sysfs-class-power (from memory).
func TestReadsWhatLinuxTells(t *testing.T) {
	there := func(string) (string, error) { return "/usr/bin/systemd-inhibit", nil }
	gone := func(string) (string, error) { return "", errors.New("not found") }
	for _, c := range []struct {
		name, system, files string
		find                func(string) (string, error)
		battery             float64 // negative: not told
		charging, told      bool
		hold                string
	}{
		{"low and discharging", "linux", "BAT0/type=Battery BAT0/status=Discharging BAT0/capacity=9 AC/type=Mains AC/online=0", there, 0.09, false, true, "systemd-inhibit"},
		{"low and charging", "linux", "BAT0/type=Battery BAT0/status=Charging BAT0/capacity=9", gone, 0.09, true, true, ""},
		{"on mains, held at a threshold", "linux", "BAT0/type=Battery BAT0/status=Discharging BAT0/capacity=60 AC/type=Mains AC/online=1", there, 0.6, true, true, "systemd-inhibit"},
		{"two batteries", "linux", "BAT0/type=Battery BAT0/status=Discharging BAT0/capacity=10 BAT1/type=Battery BAT1/status=Discharging BAT1/capacity=30", there, 0.2, false, true, "systemd-inhibit"},
		{"a mouse's battery", "linux", "hid/type=Battery hid/scope=Device hid/status=Discharging hid/capacity=3", there, -1, false, true, "systemd-inhibit"},
		{"no battery", "linux", "AC/type=Mains AC/online=1", there, -1, true, true, "systemd-inhibit"},
		{"nonsense", "linux", "BAT0/type=Battery BAT0/status=Discharging BAT0/capacity=900", there, -1, false, true, "systemd-inhibit"},
		{"another system", "darwin", "BAT0/type=Battery BAT0/status=Discharging BAT0/capacity=9", there, -1, false, false, ""},
	} {
		root := fstest.MapFS{}
		for _, f := range strings.Fields(c.files) {
			name, value, _ := strings.Cut(f, "=")
			root[supplies+"/"+name] = &fstest.MapFile{Data: []byte(value + "\n")}
		}
		s := Reader{System: c.system, Root: root, Find: c.find}.Read()
		if c.battery < 0 != (s.Battery == nil) || s.Battery != nil && math.Abs(*s.Battery-c.battery) > 1e-9 ||
			s.Charging != c.charging || s.Told != c.told || s.HoldOff != c.hold {
			t.Errorf("%s: %+v", c.name, s)
		}
	}
	if s := (Reader{System: "linux", Root: fstest.MapFS{}, Find: gone}).Read(); s.Battery != nil || !s.Told {
		t.Errorf("without the folder: %+v", s)
	}
}
