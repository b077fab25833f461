package sheet

import (
	"bytes"
	"fmt"
	"os"
	"path/filepath"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"
)

func TestList(t *testing.T) {
	root := t.TempDir()
	make := func(rig, board, start, outcome string) {
		t.Helper()
		h := testHeader
		h.Rig, h.BoardID, h.Start = rig, board, start
		at, _ := time.Parse(time.RFC3339, start)
		s, err := Create(filepath.Join(root, NewDirName(rig, board, at, "aaaa")), h, testClock())
		if err != nil {
			t.Fatal(err)
		}
		if outcome != "" {
			if err := s.Close(outcome, ""); err != nil {
				t.Fatal(err)
			}
		}
	}
	make("PUMP-3", "7A31-22", "2024-11-04T10:00:00Z", "accepted")
	make("PUMP-3", "9B00-01", "2025-11-04T10:00:00+01:00", "no-adjustment")
	make("FAN-1", "7A31-22", "2025-11-04T09:30:00Z", "")
	os.WriteFile(filepath.Join(root, "notes.txt"), []byte("mine"), 0o644)
	os.Mkdir(filepath.Join(root, "photos"), 0o755)

	tests := []struct {
		name   string
		filter Filter
		want   []string
	}{
		// 09:30Z is after 10:00+01:00: the zone counts.
		{"all, newest first", Filter{}, []string{"FAN-1 7A31-22 ", "PUMP-3 9B00-01 no-adjustment", "PUMP-3 7A31-22 accepted"}},
		{"one rig", Filter{Rig: "PUMP-3"}, []string{"PUMP-3 9B00-01 no-adjustment", "PUMP-3 7A31-22 accepted"}},
		{"one board", Filter{BoardID: "7A31-22"}, []string{"FAN-1 7A31-22 ", "PUMP-3 7A31-22 accepted"}},
		{"both", Filter{Rig: "FAN-1", BoardID: "9B00-01"}, nil},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			found, err := List(root, tt.filter)
			if err != nil {
				t.Fatal(err)
			}
			var got []string
			for _, l := range found {
				got = append(got, fmt.Sprintf("%s %s %s", l.Header.Rig, l.Header.BoardID, l.Outcome))
			}
			if diff := cmp.Diff(tt.want, got); diff != "" {
				t.Error(diff)
			}
		})
	}
	if found, err := List(filepath.Join(root, "nowhere"), Filter{}); err != nil || found != nil {
		t.Errorf("a folder that is not there: %v, %v", found, err)
	}
}

func TestNewDirName(t *testing.T) {
	at := time.Date(2025, 11, 4, 10, 12, 33, 0, time.FixedZone("", 3600))
	if got, want := NewDirName("PUMP-3", "7A31-22", at, "k3f9"), "20251104-091233-pump-3-7a31-22-k3f9"; got != want {
		t.Errorf("got %s, want %s", got, want)
	}
	if got, want := NewDirName("../../x", "\x1b[2J", at, ""), "20251104-091233-x-2j-x"; got != want {
		t.Errorf("hostile: got %s, want %s", got, want)
	}
	suffix, err := NewSuffix(bytes.NewReader([]byte{0, 31, 32, 63, 255, 1, 2, 3}))
	if err != nil || suffix != "0z0zz123" {
		t.Errorf("suffix %q, %v", suffix, err)
	}
	a, _ := NewSuffix(nil)
	b, _ := NewSuffix(nil)
	if a == b {
		t.Errorf("two suffixes alike: %s", a)
	}
}

// The XDG Base Directory Specification 0.8: data belongs in $XDG_DATA_HOME, if
// that is not set or empty in $HOME/.local/share, and relative paths are to be
// ignored.
func TestDataDir(t *testing.T) {
	tests := []struct {
		name, goos string
		env        map[string]string
		want       string
	}{
		{"set", "linux", map[string]string{"XDG_DATA_HOME": "/data", "HOME": "/home/a"}, "/data/gainwright/sheets"},
		{"empty", "linux", map[string]string{"HOME": "/home/a"}, "/home/a/.local/share/gainwright/sheets"},
		{"relative", "linux", map[string]string{"XDG_DATA_HOME": "data", "HOME": "/home/a"}, "/home/a/.local/share/gainwright/sheets"},
		{"macOS", "darwin", map[string]string{"HOME": "/Users/a"}, "/Users/a/Library/Application Support/gainwright/sheets"},
		{"Windows", "windows", map[string]string{"LOCALAPPDATA": "/l"}, "/l/gainwright/sheets"},
		{"nothing known", "linux", nil, ""},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			got, err := DataDir(tt.goos, func(k string) string { return tt.env[k] })
			if filepath.ToSlash(got) != tt.want || (err != nil) != (tt.want == "") {
				t.Errorf("got %q, %v", got, err)
			}
		})
	}
}

func BenchmarkList5000(b *testing.B) {
	root := b.TempDir()
	for i := range 5000 {
		h := testHeader
		h.Rig = fmt.Sprintf("RIG-%d", i%50)
		s, err := Create(filepath.Join(root, fmt.Sprintf("%05d", i)), h, testClock())
		if err == nil {
			err = s.Close("accepted", "")
		}
		if err != nil {
			b.Fatal(err)
		}
	}
	for b.Loop() {
		found, err := List(root, Filter{Rig: "RIG-7"})
		if err != nil || len(found) != 100 {
			b.Fatal(len(found), err)
		}
	}
}

func testTime(t *testing.T) time.Time {
	t.Helper()
	at, err := time.Parse(time.RFC3339, testHeader.Start)
	if err != nil {
		t.Fatal(err)
	}
	return at
}
