package protocol

import "testing"

// A board that starts anew numbers from 0 again. Without being told, the framer
// would take up to 127 samples for old ones: more than a second at 100 Hz.
func TestSequenceBeginsAnewAfterARestart(t *testing.T) {
	var s seen
	var f Framer
	feed := func(seq uint8, us uint32) { f.Feed(AppendFast(nil, RawFast{Seq: seq, TimeUS: us}), &s) }
	feed(98, 4_998_000)
	feed(100, 5_000_000)
	feed(5, 8_000)
	if f.Stats.Samples != 2 || f.Stats.Stale != 1 {
		t.Fatalf("%+v: a number far back is stale", f.Stats)
	}
	f.Restarted()
	feed(6, 9_000)
	if n := len(s.samples); n != 3 || s.samples[2].Seq != 6 || s.samples[2].BoardUS != 9_000 || f.Stats.Stale != 1 {
		t.Errorf("after the restart: %+v, %+v", f.Stats, s.samples[n-1])
	}
}
