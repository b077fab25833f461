package sheet

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"gainwright/tune/sheet/plain"
)

// Bounds on what is read whole. A sheet of a working day is far below them; an
// index that is not is no index.
const (
	indexMax = 64 << 20
	entryMax = 512 << 20
)

// ErrNoEntry is returned where a sheet has no entry of the kind asked for.
var ErrNoEntry = errors.New("the sheet has no such entry")

// Reader is a sheet that was written earlier. It never writes.
type Reader struct {
	dir    string
	header Header
	lines  []indexLine
	loose  []string // files without a line
	head   string
	torn   bool // the last line of the index has no end
}

// indexLine is one line of the index with what a check of the chain needs.
type indexLine struct {
	Line
	body string
	at   int // line number in index.txt, from 1
}

// Open reads a sheet and returns what is missing or torn: after a kill there is
// something, and the rest can be read all the same. Open looks at names and
// lengths; Check reads every byte. The Reader is never nil; in a folder without
// an index it is empty.
func Open(dir string) (*Reader, []Problem) {
	r := &Reader{dir: dir}
	text, err := r.load(indexName, indexMax)
	if err != nil {
		return r, []Problem{{Kind: Removed, File: indexName, Text: "no index can be read here: " + cause(err)}}
	}
	problems := r.parse(string(text))
	problems = append(problems, r.files()...)
	if line, ok := r.First(KindHeader); !ok {
		problems = append(problems, Problem{Kind: Removed, Entry: 1, File: headerName, Text: "no header: whose record this is, is not known"})
	} else if err := r.JSON(line, &r.header); err != nil {
		problems = append(problems, Problem{Kind: Unreadable, Entry: line.Number, File: line.File, Text: cause(err)})
	}
	if !r.Closed() {
		problems = append(problems, Problem{
			Kind: Unfinished, Entry: len(r.lines), File: indexName,
			Text: "the last entry is no closing one: the job was broken off, or the end was cut off",
		})
	}
	return r, problems
}

// parse splits the index. A line that cannot be read costs that line only.
func (r *Reader) parse(text string) []Problem {
	var problems []Problem
	rest, inHead := text, true
	for at := 1; rest != ""; at++ {
		line, after, ended := strings.Cut(rest, "\n")
		if inHead = inHead && strings.HasPrefix(line, "#"); inHead {
			r.head += line
			if ended {
				r.head += "\n"
			}
			r.torn, rest = !ended, after
			continue
		}
		l, body, err := parseLine(line)
		switch {
		case !ended:
			r.torn = true
			problems = append(problems, Problem{Kind: Cut, File: indexName, Line: at, Text: "the last line has no end; what it entered is not counted"})
		case err != nil:
			problems = append(problems, Problem{Kind: Changed, File: indexName, Line: at, Text: err.Error()})
		default:
			r.lines = append(r.lines, indexLine{l, body, at})
		}
		rest = after
	}
	if len(r.head) < len(preamble) && strings.HasPrefix(preamble, r.head) && len(r.lines) == 0 {
		problems = append(problems, Problem{Kind: Cut, File: indexName, Line: 1, Text: "the index ends before its first entry"})
	}
	return problems
}

// files holds the lengths on the disk against the index, both ways.
func (r *Reader) files() []Problem {
	found, err := os.ReadDir(r.dir)
	if err != nil {
		return []Problem{{Kind: Unreadable, File: indexName, Text: cause(err)}}
	}
	sizes := map[string]int64{}
	for _, f := range found {
		size := int64(-1) // not a plain file
		if info, err := f.Info(); err == nil && info.Mode().IsRegular() {
			size = info.Size()
		}
		sizes[f.Name()] = size
	}
	var problems []Problem
	listed := map[string]int64{indexName: 0}
	for _, l := range r.lines {
		listed[l.File] = max(listed[l.File], l.Bytes)
		size, ok := sizes[l.File]
		switch {
		case !ok:
			problems = append(problems, Problem{Kind: Removed, Entry: l.Number, File: l.File, Text: "the file is not in the folder"})
		case size < 0:
			problems = append(problems, Problem{Kind: Changed, Entry: l.Number, File: l.File, Text: "is no plain file any more"})
		case size < l.Bytes:
			problems = append(problems, Problem{Kind: Cut, Entry: l.Number, File: l.File, Text: fmt.Sprintf("holds %d bytes of %d", size, l.Bytes)})
		}
	}
	for _, f := range found {
		want, ok := listed[f.Name()]
		if !ok {
			r.loose = append(r.loose, f.Name())
			problems = append(problems, Problem{Kind: Added, File: f.Name(), Text: "stands in the folder without an entry: added later, or being written when the job broke off"})
			continue
		}
		if size := sizes[f.Name()]; f.Name() != indexName && size > want {
			problems = append(problems, Problem{Kind: Added, File: f.Name(), Text: fmt.Sprintf("holds %d bytes, of which the first %d were entered", size, want)})
		}
	}
	return problems
}

// Dir returns the folder.
func (r *Reader) Dir() string { return r.dir }

// Header returns whose record this is; the zero Header if that was lost.
func (r *Reader) Header() Header { return r.header }

// Lines returns the entries, oldest first, as a copy.
func (r *Reader) Lines() []Line {
	out := make([]Line, len(r.lines))
	for i, l := range r.lines {
		out[i] = l.Line
	}
	return out
}

// Loose returns the files of the folder that have no entry.
func (r *Reader) Loose() []string { return slices.Clone(r.loose) }

// Closed reports whether the job was finished and its record closed.
func (r *Reader) Closed() bool {
	return len(r.lines) > 0 && r.lines[len(r.lines)-1].Kind == KindClose && !r.torn
}

// Closing returns the outcome; ErrNoEntry for a job that was broken off.
func (r *Reader) Closing() (Closing, error) {
	var c Closing
	if !r.Closed() {
		return c, fmt.Errorf("%w: %s", ErrNoEntry, KindClose)
	}
	err := r.JSON(r.lines[len(r.lines)-1].Line, &c)
	return c, err
}

// Chain returns the chain after the last entry, "" for an empty sheet.
func (r *Reader) Chain() string {
	if len(r.lines) == 0 {
		return ""
	}
	return r.lines[len(r.lines)-1].Chain
}

// Find returns the entries of a kind, oldest first. An empty name stands for
// every name.
func (r *Reader) Find(kind Kind, name string) []Line {
	var out []Line
	for _, l := range r.lines {
		if l.Kind == kind && (name == "" || l.Name() == plain.FileName(name, nameMax)) {
			out = append(out, l.Line)
		}
	}
	return out
}

// First returns the oldest entry of a kind.
func (r *Reader) First(kind Kind) (Line, bool) {
	if found := r.Find(kind, ""); len(found) > 0 {
		return found[0], true
	}
	return Line{}, false
}

// Last returns the newest entry of a kind and name, as Find takes them.
func (r *Reader) Last(kind Kind, name string) (Line, bool) {
	if found := r.Find(kind, name); len(found) > 0 {
		return found[len(found)-1], true
	}
	return Line{}, false
}

// ByFile returns the newest entry whose file is named so.
func (r *Reader) ByFile(file string) (Line, bool) {
	for _, l := range slices.Backward(r.lines) {
		if l.File == file {
			return l.Line, true
		}
	}
	return Line{}, false
}

// Read returns the content of an entry. It is an error, with the file's name,
// if the content is not what was entered.
func (r *Reader) Read(l Line) ([]byte, error) {
	b, err := r.load(l.File, entryMax)
	if err != nil {
		return nil, err
	}
	if int64(len(b)) > l.Bytes {
		b = b[:l.Bytes] // a stream grew after it was noted
	}
	if hash(b) != l.SHA256 {
		return nil, fmt.Errorf("%s (entry %d) is not what was entered: its hash differs; nothing is computed from it", l.File, l.Number)
	}
	return b, nil
}

// JSON reads an entry into v.
func (r *Reader) JSON(l Line, v any) error {
	b, err := r.Read(l)
	if err != nil {
		return err
	}
	if err := json.Unmarshal(b, v); err != nil {
		return fmt.Errorf("%s (entry %d): %w", l.File, l.Number, err)
	}
	return nil
}

// LastJSON reads the newest entry of a kind and name into v.
func (r *Reader) LastJSON(kind Kind, name string, v any) error {
	l, ok := r.Last(kind, name)
	if !ok {
		return fmt.Errorf("%w: %s %s", ErrNoEntry, kind, name)
	}
	return r.JSON(l, v)
}

// load reads a plain file of the folder; a link or a device put there instead
// is refused.
func (r *Reader) load(name string, limit int64) ([]byte, error) {
	path := filepath.Join(r.dir, name)
	info, err := os.Lstat(path)
	if err != nil {
		return nil, err
	}
	if !info.Mode().IsRegular() {
		return nil, fmt.Errorf("%s is no plain file", name)
	}
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	var b bytes.Buffer
	if _, err := io.Copy(&b, io.LimitReader(f, limit+1)); err != nil {
		return nil, err
	}
	if int64(b.Len()) > limit {
		return nil, fmt.Errorf("%s is longer than %d bytes", name, limit)
	}
	return b.Bytes(), nil
}

// cause returns the words of an error without this machine's paths, which say
// nothing to the next reader.
func cause(err error) string {
	var path *fs.PathError
	if errors.As(err, &path) {
		return path.Err.Error()
	}
	return plain.Visible(err.Error(), 200)
}
