package sheet

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"regexp"
	"strconv"
	"strings"
	"time"
)

// Kind says what an entry is. It is the second part of its file's name.
type Kind string

// The kinds of entry.
const (
	KindHeader     Kind = "header"
	KindIdentity   Kind = "identity"
	KindRig        Kind = "rig"
	KindJob        Kind = "job"
	KindPart       Kind = "part"
	KindAsFound    Kind = "as-found"
	KindCheck      Kind = "check"
	KindInterlock  Kind = "interlock"
	KindRun        Kind = "run"
	KindTrace      Kind = "trace"
	KindFit        Kind = "fit"
	KindExperiment Kind = "experiment"
	KindProposal   Kind = "proposal"
	KindPush       Kind = "push"
	KindVerify     Kind = "verify"
	KindStore      Kind = "store"
	KindAsLeft     Kind = "as-left"
	KindRemark     Kind = "remark"
	KindEvent      Kind = "event"
	KindCard       Kind = "card"
	KindTape       Kind = "tape"
	KindClose      Kind = "close"
)

var kinds = map[Kind]bool{
	KindHeader: true, KindIdentity: true, KindRig: true, KindJob: true, KindPart: true, KindAsFound: true,
	KindCheck: true, KindInterlock: true, KindRun: true, KindTrace: true, KindFit: true, KindExperiment: true, KindProposal: true,
	KindPush: true, KindVerify: true, KindStore: true, KindAsLeft: true, KindRemark: true,
	KindEvent: true, KindCard: true, KindTape: true, KindClose: true,
}

const (
	indexName  = "index.txt"
	headerName = "0001-header-job.json"
	nameMax    = 48 // bytes of the part of a file name that comes from outside
	timeLayout = "2006-01-02T15:04:05.000Z07:00"
)

// preamble opens every index. It is the whole description of the format, for a
// reader who has nothing but the folder.
const preamble = `# gainwright sheet, format 1
# The record of one job. One line for each entry, oldest first:
# number, time, kind, file, bytes, sha256 of the file, chain.
# A file that grows is listed again each time it is noted: bytes and sha256 are of its beginning.
# chain = sha256 of: the chain of the line before, one blank, this line up to and including the sha256.
# The first line follows the sha256 of these # lines:  grep '^#' index.txt | sha256sum
# By hand:  printf '%s %s' CHAIN-BEFORE 'LINE-UP-TO-SHA256' | sha256sum
# The chain proves order and integrity. It does not prove who wrote it.
`

// Line is one entry as the index holds it.
type Line struct {
	Number int       // from 1
	Time   time.Time // of the wall clock at the start plus the time since
	Kind   Kind
	File   string // in the sheet's folder
	Bytes  int64  // length of the file, or of its beginning for a file that grows
	SHA256 string // of those bytes, 64 hex digits
	Chain  string // 64 hex digits
}

// Name returns the part of the file name between the kind and the extension.
func (l Line) Name() string {
	name := l.File[strings.Index(l.File, string(l.Kind))+len(l.Kind):]
	name = strings.TrimPrefix(name, "-")
	if dot := strings.LastIndexByte(name, '.'); dot >= 0 {
		name = name[:dot]
	}
	return name
}

// body is the line without its chain: what the chain is computed over.
func (l Line) body() string {
	return fmt.Sprintf("%04d %s %s %s %d %s", l.Number, l.Time.Format(timeLayout), l.Kind, l.File, l.Bytes, l.SHA256)
}

func genesis(head string) string { return hash([]byte(head)) }

func link(before, body string) string { return hash([]byte(before + " " + body)) }

func hash(b []byte) string {
	sum := sha256.Sum256(b)
	return hex.EncodeToString(sum[:])
}

var (
	fileShape = regexp.MustCompile(`^[a-z0-9][a-z0-9._-]{0,120}$`)
	hashShape = regexp.MustCompile(`^[0-9a-f]{64}$`)
)

// parseLine reads one line of an index. The file name is taken only if it is a
// plain one: an index from elsewhere must not make the reader leave the folder.
func parseLine(s string) (Line, string, error) {
	words := strings.Split(s, " ")
	if len(words) != 7 {
		return Line{}, "", fmt.Errorf("%d words where 7 belong", len(words))
	}
	number, err := strconv.Atoi(words[0])
	if err != nil || number < 1 {
		return Line{}, "", errors.New("column 1: no entry number")
	}
	when, err := time.Parse(timeLayout, words[1])
	if err != nil {
		return Line{}, "", errors.New("column 2: no time")
	}
	kind := Kind(words[2])
	if !kinds[kind] {
		return Line{}, "", errors.New("column 3: no known kind of entry")
	}
	file := words[3]
	if !fileShape.MatchString(file) || strings.Contains(file, "..") || !strings.Contains(file, string(kind)) {
		return Line{}, "", errors.New("column 4: no file name of a sheet")
	}
	size, err := strconv.ParseInt(words[4], 10, 64)
	if err != nil || size < 0 {
		return Line{}, "", errors.New("column 5: no length")
	}
	if !hashShape.MatchString(words[5]) || !hashShape.MatchString(words[6]) {
		return Line{}, "", errors.New("columns 6 and 7: no hashes")
	}
	l := Line{Number: number, Time: when, Kind: kind, File: file, Bytes: size, SHA256: words[5], Chain: words[6]}
	return l, strings.Join(words[:6], " "), nil
}
