package simrig

import (
	"strconv"
	"strings"

	"gainwright/protocol"
)

// answer collects the lines that answer one request.
type answer struct {
	n     uint16
	lines []byte
}

func (a *answer) line(body string) { a.lines = protocol.AppendLine(a.lines, []byte(body)) }

// ok ends the answer well.
func (a *answer) ok(fields ...string) {
	s := "ok " + strconv.Itoa(int(a.n))
	if len(fields) > 0 {
		s += " " + strings.Join(fields, " ")
	}
	a.line(s)
}

// no refuses.
func (a *answer) no(why protocol.Refusal) {
	a.line("no " + strconv.Itoa(int(a.n)) + " " + strconv.Itoa(int(why)) + " " + why.String())
}

// done ends the answer with ok or the refusal, 0 being none.
func (a *answer) done(why protocol.Refusal, fields ...string) {
	if why != 0 {
		a.no(why)
		return
	}
	a.ok(fields...)
}

// request works off a numbered request, or repeats the answer if it is the one
// answered last.
func (r *Rig) request(c protocol.Command, crc uint16) {
	x := &r.board.rx
	if x.any && x.lastN == c.N && x.lastCRC == crc {
		r.sendAll(x.answer)
		return
	}
	a := answer{n: c.N}
	r.dispatch(c, &a)
	x = &r.board.rx
	x.any, x.lastN, x.lastCRC, x.answer = true, c.N, crc, a.lines
	r.sendAll(a.lines)
}

func (r *Rig) sendAll(lines []byte) {
	for _, l := range strings.SplitAfter(string(lines), "\n") {
		if l != "" {
			r.raw([]byte(l))
		}
	}
}

var verbs = map[string]func(*Rig, []string, *answer){
	protocol.VerbID:     func(r *Rig, _ []string, a *answer) { r.identityLines(a) },
	protocol.VerbTel:    func(r *Rig, _ []string, a *answer) { r.tell(); a.ok() },
	protocol.VerbStop:   func(r *Rig, _ []string, a *answer) { r.cut(); a.ok() },
	protocol.VerbRate:   (*Rig).doRate,
	protocol.VerbNonce:  (*Rig).doNonce,
	protocol.VerbArm:    (*Rig).doArm,
	protocol.VerbDisarm: (*Rig).doDisarm,
	protocol.VerbRamp:   (*Rig).doRamp,
	protocol.VerbReset:  (*Rig).doReset,
	protocol.VerbLimit:  (*Rig).doLimit,
	protocol.VerbGain:   (*Rig).doGain,
	protocol.VerbCap:    (*Rig).doCapture,
	protocol.VerbLog:    (*Rig).doLog,
	protocol.VerbInput:  (*Rig).doInput,
	protocol.VerbExper:  (*Rig).doExper,
}

func (r *Rig) dispatch(c protocol.Command, a *answer) {
	do, known := verbs[c.Verb]
	if !known {
		a.no(protocol.RefUnknown)
		return
	}
	args := make([]string, len(c.Args))
	for i, b := range c.Args {
		args[i] = string(b)
	}
	do(r, args, a)
}

// doInput: in → the input bits.
func (r *Rig) doInput(args []string, a *answer) {
	if len(args) != 0 {
		a.no(protocol.RefArgument)
		return
	}
	a.ok(hex16(r.inputs))
}

// doLog: log <i> → <i> <total> <cause> <time> <beat> <off> <speed>.
func (r *Rig) doLog(args []string, a *answer) {
	if len(args) != 1 {
		a.no(protocol.RefArgument)
		return
	}
	i, ok := protocol.ParseUint([]byte(args[0]), 1000)
	s, kept := r.board.log.get(int(i))
	if !ok || !kept {
		a.no(protocol.RefArgument)
		return
	}
	us := func(at int64) string {
		return strconv.FormatUint(uint64(uint32((at-s.power)/1000)), 10)
	}
	a.ok(args[0], strconv.Itoa(r.board.log.total), strconv.Itoa(int(s.cause)), us(s.seen), us(s.beat), us(s.off),
		strconv.FormatInt(milli(s.speed), 10))
}

func hex16(v uint16) string { return string(protocol.AppendHex16(nil, v)) }
func hex32(v uint32) string { return string(protocol.AppendHex32(nil, v)) }

// argument returns args[i] or "".
func argument(args []string, i int) string {
	if i < len(args) {
		return args[i]
	}
	return ""
}

// slot reads a slot number below n.
func slot(s string, n int) (int, bool) {
	v, ok := protocol.ParseUint([]byte(s), int64(n)-1)
	return int(v), ok
}

// milli is v in thousandths, rounded.
func milli(v float32) int64 {
	m := float64(v) * 1000
	if m < 0 {
		return int64(m - 0.5)
	}
	return int64(m + 0.5)
}
