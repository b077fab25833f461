package sheet

import (
	"bytes"
	"fmt"

	"gainwright/tune/sheet/plain"
	"gainwright/tune/trace"
)

// Trace records a trace as CSV: notes and settings as comments, names, units,
// rows. Every number reads back bit for bit. A trace that is not valid is
// refused and leaves the sheet as it was.
func (s *Sheet) Trace(name string, tr *trace.Trace, notes ...string) (Line, error) {
	clean := *tr
	clean.Name = plain.Visible(tr.Name, 200)
	remarks := make([]string, len(notes))
	for i, n := range notes {
		// The word in front keeps a note from being read back as a setting.
		remarks[i] = "note: " + plain.Visible(n, 0)
	}
	var b bytes.Buffer
	if err := clean.WriteCSV(&b, remarks...); err != nil {
		return Line{}, fmt.Errorf("sheet: trace %s: %w", plain.Visible(name, 40), err)
	}
	return s.enter(KindTrace, name, "csv", []byte(plain.Block(b.String())))
}

// Trace reads a trace entry.
func (r *Reader) Trace(l Line) (*trace.Trace, error) {
	b, err := r.Read(l)
	if err != nil {
		return nil, err
	}
	return trace.ReadCSV(bytes.NewReader(b), l.File)
}
