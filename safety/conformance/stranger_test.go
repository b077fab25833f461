package conformance

import (
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"
)

const stranger = "../../protocol/testdata/stranger/board.py"

// A board in another language, written from SPEC.md alone: what it had to guess
// was a fault of the document.
func TestStrangersBoardConforms(t *testing.T) {
	need(t, "python3")
	sources(t, stranger)
	hostConforms(t, startHost(t, "python3", stranger), Options{Permit: permitted, Brief: true})
}

// Each line of that board that a paragraph asks for, spoiled, fails the check of
// that paragraph: no check passes whatever the board does.
func TestChecksFindWhatIsSpoiled(t *testing.T) {
	need(t, "python3")
	sources(t, stranger)
	text, err := os.ReadFile(stranger)
	if err != nil {
		t.Fatal(err)
	}
	for _, m := range []struct{ was, is, want string }{
		{`line = line[:-1]`, `pass`, "P1.1a"},
		{`len(self.line) < 127`, `len(self.line) < 126`, "P1.1b"},
		{`elif line:`, `else:`, "P1.1c"},
		{`digits(tail[1:].decode(), 4) != crc(body)`, `False`, "P1.2b P1.2c"},
		{`tail[:1] != b";" or digits(tail[1:].decode(), 4)`, `tail[:1] != b";" or int(tail[1:], 16)`, "P1.2d"},
		{`or str(int(s)) != s`, ``, "P1.3a"},
		{`all(c in "0123456789ABCDEF" for c in s)`, `all(c in "0123456789ABCDEFabcdef" for c in s)`, "P1.3b"},
		{`if long:`, `if False:`, "P1.4a"},
		{`any(c < 0x20 or c > 0x7E for c in line) or`, ``, "P1.4c"},
		{`self.us - self.grumbled >= 10000`, `True`, "P1.4d"},
		{"            self.cut()\n            self.line, self.long = bytearray(), False", "            self.cut()", "P2.1b"},
		{`if byte == 0x18:`, `if byte == 0x18 and not self.line:`, "P2.1c P2.1d"},
		{`self.volts, self.nonce, self.token = 0.0, None, None`, `self.volts, self.token = 0.0, None`, "P2.2b"},
		{`(self.cuts + 1) % 65536`, `1`, "P2.3a P2.3c"},
		{`(self.cuts, self.us % 2**32)`, `(self.cuts, self.us // 1000)`, "P2.3b"},
		{`raise No(3)`, `raise No(4)`, "P3.2a"},
		{`if n == 0:`, `if False:`, "P3.2b"},
		{`if self.last and`, `if False and`, "P3.3a"},
		{`== (n, tail):`, `[0] == n:`, "P3.3b"},
		{`self.say("ok %d %d" % (n, len(lines)))`, `self.say("ok %d 24" % n)`, "P4.1a"},
		{`"win %d" % WIN, `, ``, "P4.2b"},
		{`self.seq = (self.seq + 1) % 256`, `self.seq = (self.seq + 1) % 255`, "P5.4a"},
		{`W_LSB, V_LSB = 0.05, 0.001`, `W_LSB, V_LSB = 0.001, 0.001`, "P4.2e"},
		{`self.us % 2**24`, `self.us // 2 % 2**24`, "P5.2b"},
		{`| (16 if self.trip else 0)`, ``, "P5.3b"},
		{`return str(round(real))`, `return str(round(real * 1.3))`, "P5.6a"},
		{`> 0.7 * BAUD`, `> 7 * BAUD`, "P5.6c"},
		{`self.since_v >= 200000`, `self.since_v >= 400000`, "P5.6e"},
		{`self.us - nonce[1] > 2000000`, `self.us - nonce[1] > 3000000`, "P6.1b"},
		{`nonce, self.nonce = self.nonce, None`, `nonce = self.nonce`, "P6.2c"},
		{`limits != set_crc(self.limits)`, `False`, "P6.2d"},
		{`raise No(12)`, `raise No(5)`, "P6.2e"},
		{`self.token = (number >> 8) & 0xFFFF`, `self.token = 0x1234`, "P6.2g"},
		{`not 0 < (k - self.k) % 65536 < 32768`, `not 0 <= (k - self.k) % 65536 < 32768`, "P6.3b"},
		{`not 0 < (k - self.k) % 65536 < 32768`, `k == self.k`, "P6.3c"},
		{`not 0 < (k - self.k) % 65536 < 32768`, `k <= self.k`, "P6.3f"},
		{`digits(args[0], 4) != self.token or`, ``, "P6.3d"},
		{`> self.limit("beat") * 1e6`, `> self.limit("beat") * 1.3e6`, "P6.4b"},
		{`("vmax" if verb == "dv" else "wmax"):`, `("vmax" if verb == "dv" else "wmax") + 1e6:`, "P7.4a P7.4b"},
		{`b == 0 and name not in ZERO_OK`, `False`, "P7.1b"},
		{`self.limits_staged[s] = self.checked`, `self.limits[s] = self.checked`, "P7.2c"},
		{`LIMITS[s], self.limits[s])`, `LIMITS[s], self.limits[s] & ~1)`, "P7.2e"},
		{`raise No(8)`, `pass`, "P7.2g P7.2h"},
		{`b >= 0x80000000 or`, ``, "P7.2i"},
		{`self.log.insert(0, (`, `self.log.append((`, "P7.7a P7.7b"},
		{`del self.log[6:]`, `del self.log[3:]`, "P7.7b"},
		{`self.say("ev %s %d %d" % ("trip" if cause >= 10 else "off", cause, seen % 2**32))`, `self.say("ev %s %d %d" % ("trip" if cause >= 10 else "off", cause, 7))`, "P9.2a"},
		{`self.gains = list(self.gains_staged)`, `self.gains = [x & ~1 for x in self.gains_staged]`, "P8.3e"},
		{`self.store.writes += 1`, `self.store.writes += 2`, "P8.3i"},
		{`list(store.gains), list(store.gains)`, `[bits(0.5)] * 3, list(store.gains)`, "P8.4b"},
		{`self.limits_staged, self.limits_used = list(self.limits), False`, `self.limits_staged, self.limits_used = list(self.limits), True`, "P12.2b"},
		{`"ev boot %d power" % store.boots`, `"ev boot 7 power"`, "P9.1a"},
	} {
		t.Run(m.want, func(t *testing.T) {
			t.Parallel()
			if strings.Count(string(text), m.was) == 0 {
				t.Fatalf("%q is not in the board", m.was)
			}
			file := filepath.Join(t.TempDir(), "board.py")
			if err := os.WriteFile(file, []byte(strings.Replace(string(text), m.was, m.is, 1)), 0o600); err != nil {
				t.Fatal(err)
			}
			l := startHost(t, "python3", file)
			if _, err := l.Read(300 * time.Millisecond); err != nil {
				t.Fatal(err)
			}
			want := strings.Fields(m.want)
			r, err := Run(l, Options{Permit: permitted, Restart: l.restart, Brief: true, Only: grounds(want)})
			if err != nil {
				t.Fatal(err)
			}
			if got := failed(r); !slices.Equal(got, want) {
				t.Errorf("failed %q, wanted %q", got, want)
				tell(t, Report{Checks: r.Checks})
			}
		})
	}
}

// grounds are checks with those that they rest on.
func grounds(want []string) []string {
	all := slices.Clone(want)
	for i := 0; i < len(all); i++ {
		for _, c := range list() {
			if c.id != all[i] {
				continue
			}
			if c.needs != "" {
				all = append(all, c.needs)
			}
			if c.moves {
				all = append(all, "P2.2a", "P6.4a")
			}
		}
	}
	return all
}
