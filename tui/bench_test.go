package tui

import (
	"fmt"
	"testing"
)

// BenchmarkDraw draws a whole frame of a run with strips.
func BenchmarkDraw(b *testing.B) {
	for _, st := range stages() {
		if st.name != "running" && st.name != "path" && st.name != "model" {
			continue
		}
		for _, size := range [][2]int{{80, 24}, {200, 50}} {
			b.Run(fmt.Sprintf("%s-%dx%d", st.name, size[0], size[1]), func(b *testing.B) {
				s := screenAt(st, Look{})
				b.ReportAllocs()
				for b.Loop() {
					s.Draw(st.view, size[0], size[1])
				}
			})
		}
	}
}
