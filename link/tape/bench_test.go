package tape

import (
	"io"
	"testing"
	"time"
)

// One line handed over, formatted and written to nowhere: the whole cost but for
// the disk and the goroutine. What a caller pays is the first part of it.
func BenchmarkRecord(b *testing.B) {
	line := []byte("t 12345 123456789 r 123456 12000 0;5A3C\r\n")
	w := &Writer{out: io.Discard, wake: make(chan struct{}, 1)}
	b.ReportAllocs()
	for i := 0; b.Loop(); i++ {
		w.Record(time.Second, FromBoard, line)
		if i%8000 == 0 { // about what half a second brings at 2 Mbaud
			w.swap()
			if err := w.flush(); err != nil || w.stats.LostChunks != 0 {
				b.Fatal(err, w.stats)
			}
		}
	}
}
