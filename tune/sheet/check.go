package sheet

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"
	"strings"
)

// Statement is what a check proves and what it does not; it is printed with
// every result.
const Statement = "A hash chain proves order and integrity, not who did it: whoever rewrites all of it can make one that agrees with itself. Hold the hash against the printed card."

// problemsMax bounds the list, and with it the search for each broken line's
// place, which looks at every other line.
const problemsMax = 100

// Summary is the result of a check beside its problems.
type Summary struct {
	Header  Header `json:"header"`
	Entries int    `json:"entries"`
	Closed  bool   `json:"closed"`
	Outcome string `json:"outcome,omitempty"`
	Chain   string `json:"chain"` // after the last entry
	Says    string `json:"says"`  // Statement

	chains []string
}

// Has reports whether the hash printed on a card, whole or its first digits (at
// least 8), is the chain after some entry.
func (s Summary) Has(printed string) bool {
	printed = strings.ToLower(strings.TrimSpace(printed))
	return len(printed) >= 8 && slices.ContainsFunc(s.chains, func(c string) bool { return strings.HasPrefix(c, printed) })
}

// Check reads every byte of a sheet and returns everything that is not as it
// was entered, each with its place, in the order of the index. No problem means
// that the folder agrees with its own chain; see Statement for what that is
// worth.
func Check(dir string) ([]Problem, Summary) {
	r, problems := Open(dir)
	problems = append(problems, r.checkHead()...)
	problems = append(problems, r.checkChain()...)
	problems = append(problems, r.checkContent(problems)...)
	slices.SortStableFunc(problems, func(a, b Problem) int { return a.Entry - b.Entry })
	s := Summary{Header: r.header, Entries: len(r.lines), Closed: r.Closed(), Chain: r.Chain(), Says: Statement}
	if c, err := r.Closing(); err == nil {
		s.Outcome = c.Outcome
	}
	for _, l := range r.lines {
		s.chains = append(s.chains, l.Chain)
	}
	return problems, s
}

func (r *Reader) checkHead() []Problem {
	if r.head == preamble || (r.torn && strings.HasPrefix(preamble, r.head)) {
		return nil
	}
	return []Problem{{Kind: Changed, File: indexName, Line: 1, Text: "the lines that begin with # are not those this format begins with"}}
}

// checkChain finds, for each line, the line it was written after. One that
// follows another than the one above it was moved, or what stood between is
// gone; one that follows none was changed, or the line above it was.
func (r *Reader) checkChain() []Problem {
	heads := map[string]int{genesis(r.head): -1} // chain → which line carries it
	for i, l := range r.lines {
		if _, twice := heads[l.Chain]; !twice {
			heads[l.Chain] = i
		}
	}
	var problems []Problem
	seen := map[string]bool{}
	before, lastNumber := genesis(r.head), 0
	for i, l := range r.lines {
		if len(problems) >= problemsMax {
			problems = append(problems, Problem{Kind: Changed, Entry: l.Number, File: indexName, Line: l.at, Text: "and more from here on; they are not listed"})
			break
		}
		if p, ok := r.judge(i, before, lastNumber, heads, seen); ok {
			p.Entry, p.File, p.Line = l.Number, indexName, l.at
			problems = append(problems, p)
		}
		seen[l.Chain] = true
		before, lastNumber = l.Chain, l.Number
	}
	return problems
}

// judge says what is wrong with line i, if anything. heads holds every chain of
// the index, seen those above the line.
func (r *Reader) judge(i int, before string, lastNumber int, heads map[string]int, seen map[string]bool) (Problem, bool) {
	l := r.lines[i]
	if seen[l.Chain] {
		return Problem{Kind: Added, Text: "the line stands here a second time"}, true
	}
	if link(before, l.body) == l.Chain {
		return Problem{}, false
	}
	for chain, at := range heads {
		if link(chain, l.body) != l.Chain {
			continue
		}
		after := "the head of the index"
		if at >= 0 {
			after = fmt.Sprintf("entry %d", r.lines[at].Number)
		}
		if at < i && (lastNumber == l.Number || lastNumber == l.Number-1) {
			return Problem{Kind: Added, Text: fmt.Sprintf("was written right after %s; what stands between was put there later", after)}, true
		}
		return Problem{Kind: Reordered, Text: fmt.Sprintf("was written right after %s and stands elsewhere now", after)}, true
	}
	switch {
	case l.Number == lastNumber+1 && lastNumber == 0:
		return Problem{Kind: Changed, Text: "the line, or the head of the index, is not as written"}, true
	case l.Number == lastNumber+1:
		return Problem{Kind: Changed, Text: fmt.Sprintf("the line does not follow entry %d: one of the two is not as written", lastNumber)}, true
	case l.Number == lastNumber+2:
		return Problem{Kind: Removed, Text: fmt.Sprintf("entry %d before it is gone", lastNumber+1)}, true
	case l.Number > lastNumber:
		return Problem{Kind: Removed, Text: fmt.Sprintf("entries %d to %d before it are gone", lastNumber+1, l.Number-1)}, true
	default:
		return Problem{Kind: Changed, Text: fmt.Sprintf("its number does not follow %d", lastNumber)}, true
	}
}

// checkContent hashes every file. What Open found missing or short is not
// reported twice.
func (r *Reader) checkContent(known []Problem) []Problem {
	skip := map[string]bool{}
	for _, p := range known {
		if p.Kind == Removed || p.Kind == Cut || p.Kind == Changed {
			skip[p.File] = true
		}
	}
	whose := map[string]Line{} // hash → the entry that has this content
	for _, l := range r.lines {
		whose[l.SHA256] = l.Line
	}
	var problems []Problem
	for _, l := range r.lines {
		if skip[l.File] {
			continue
		}
		sum, err := r.hashFile(l.File, l.Bytes)
		switch {
		case err != nil:
			problems = append(problems, Problem{Kind: Unreadable, Entry: l.Number, File: l.File, Text: cause(err)})
		case sum != l.SHA256:
			text := "the content is not what was entered"
			if other, ok := whose[sum]; ok {
				text = fmt.Sprintf("holds the content of entry %d (%s)", other.Number, other.File)
			}
			problems = append(problems, Problem{Kind: Changed, Entry: l.Number, File: l.File, Text: text})
		}
	}
	return problems
}

func (r *Reader) hashFile(name string, size int64) (string, error) {
	f, err := os.Open(filepath.Join(r.dir, name))
	if err != nil {
		return "", err
	}
	defer f.Close()
	sum := sha256.New()
	if _, err := io.Copy(sum, io.LimitReader(f, size)); err != nil {
		return "", err
	}
	return hex.EncodeToString(sum.Sum(nil)), nil
}
