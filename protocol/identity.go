package protocol

import (
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"
)

// Major is the major version of the protocol that this package speaks. A board
// of another major version is look-only.
const Major = 1

// Identity is what a board says of itself in answer to id. Values that it did
// not give are zero.
type Identity struct {
	ProtoMajor, ProtoMinor int
	Firmware               string
	Board                  string // unique id of the board
	Boots                  uint16
	ResetCause             string
	Baud                   int

	Loop         time.Duration // period of the control loop
	ComputeDelay time.Duration // from the latch of the counts to the output that uses them
	WindowLoops  int           // speed is the mean over so many loop periods

	Law            string    // pi or pid
	Form           string    // parallel, ideal or series
	Derivative     string    // measurement or error
	Discretisation string    // backward-euler, forward-euler, tustin or incremental
	AntiWindup     string    // none, clamp or back-calculation
	Number         string    // float (binary32) or int (32 bits)
	GainNames      []string  // slots of a gain set, in order
	GainLSB        []float64 // of integer gains: what one unit of each slot stands for, SI
	LimitNames     []string  // slots of the limits, in order

	Input       string  // V, duty, dac or A
	BusMeasured bool    // the bus voltage is measured
	BusNominal  float64 // V
	Quadrants   int     // 1, 2 or 4
	OffMeans    string  // coast or short

	CountsPerTurn float64 // at the encoder's own shaft
	EncoderSide   string  // motor or load
	GearRatio     float64 // motor turns per load turn

	Scales    Scales
	VoltsMax  float64 // hard limits of the board, V, rad/s, A
	SpeedMax  float64
	AmpsMax   float64
	BeatMin   time.Duration // range of the heartbeat timeout that can be set
	BeatMax   time.Duration
	Powers    []string // optional powers: capture, ramp, relay, prbs, steps …
	CaptureN  int      // samples of capture memory
	Inputs    []string // names of the input bits, from bit 0
	UnknownID []string // keys that this package does not know, kept as they came
}

// Can reports whether the board has the optional power of that name.
func (id *Identity) Can(power string) bool {
	for _, p := range id.Powers {
		if p == power {
			return true
		}
	}
	return false
}

// RadPerCount is the angle of one encoder count at the motor shaft, or 0.
func (id *Identity) RadPerCount() float64 {
	if id.CountsPerTurn <= 0 {
		return 0
	}
	r := 2 * math.Pi / id.CountsPerTurn
	if id.EncoderSide == "load" && id.GearRatio > 0 {
		r *= id.GearRatio
	}
	return r
}

// Window is the length of the speed window.
func (id *Identity) Window() time.Duration { return time.Duration(id.WindowLoops) * id.Loop }

// LookOnly says why this board must not be driven, or "" if nothing in its
// identity speaks against it.
func (id *Identity) LookOnly() string {
	switch {
	case id.ProtoMajor != Major:
		return fmt.Sprintf("the board speaks protocol %d.%d, this program %d.x", id.ProtoMajor, id.ProtoMinor, Major)
	case id.Loop <= 0:
		return "the board does not say its loop period"
	case id.Scales.SpeedLSB <= 0 || id.Scales.VoltsLSB <= 0:
		return "the board does not say its scales"
	case id.Baud > 0 && id.Baud < 38400:
		return fmt.Sprintf("the line runs at %d baud; below 38400 a stop takes too long", id.Baud)
	case len(id.LimitNames) == 0:
		return "the board holds no limits"
	case id.Number == "int" && len(id.GainLSB) != len(id.GainNames):
		return "the board holds integer gains and does not say what one unit of each stands for"
	}
	for i, v := range id.GainLSB {
		if v <= 0 {
			return fmt.Sprintf("one unit of gain number %d stands for nothing", i)
		}
	}
	return ""
}

// IdentityError names the identity line that could not be read.
type IdentityError struct {
	Line string
	Err  error
}

func (e *IdentityError) Error() string {
	return fmt.Sprintf("protocol: identity line %q: %v", e.Line, e.Err)
}

func (e *IdentityError) Unwrap() error { return e.Err }

// Errors of an identity.
var (
	ErrIdentityValue   = errors.New("value cannot be read")
	ErrIdentityMissing = errors.New("protocol: identity without its protocol line")
)

// ParseIdentity reads the lines of an identity, each "key values…" without the
// leading "id". Keys that are not known are kept and ignored.
func ParseIdentity(lines []string) (Identity, error) {
	var id Identity
	for _, l := range lines {
		key, rest, _ := strings.Cut(l, " ")
		read, known := identityKeys[key]
		if !known {
			id.UnknownID = append(id.UnknownID, l)
			continue
		}
		p := idParser{words: strings.Fields(rest), rest: rest}
		read(&id, &p)
		if p.bad {
			return id, &IdentityError{Line: l, Err: ErrIdentityValue}
		}
	}
	if id.ProtoMajor == 0 {
		return id, ErrIdentityMissing
	}
	return id, nil
}

// idParser takes the values of one identity line from left to right.
type idParser struct {
	words []string
	rest  string
	bad   bool
}

func (p *idParser) word() string {
	if len(p.words) == 0 {
		p.bad = true
		return ""
	}
	w := p.words[0]
	p.words = p.words[1:]
	return w
}

func (p *idParser) int(max int) int {
	v, ok := ParseUint([]byte(p.word()), int64(max))
	p.bad = p.bad || !ok
	return int(v)
}

func (p *idParser) us() time.Duration {
	return time.Duration(p.int(100_000_000)) * time.Microsecond
}

// float reads eight hex digits of a binary32, finite and not negative.
func (p *idParser) float() float64 {
	v, ok := ParseHex32([]byte(p.word()))
	f := float64(math.Float32frombits(v))
	if !ok || math.IsNaN(f) || math.IsInf(f, 0) || f < 0 {
		p.bad = true
		return 0
	}
	return f
}

func (p *idParser) oneOf(words ...string) string {
	w := p.word()
	for _, x := range words {
		if w == x {
			return w
		}
	}
	p.bad = true
	return ""
}

func (p *idParser) all() []string {
	w := p.words
	p.words = nil
	return w
}

var identityKeys = map[string]func(*Identity, *idParser){
	"proto": func(id *Identity, p *idParser) {
		major, minor, ok := strings.Cut(p.word(), ".")
		a, err1 := strconv.Atoi(major)
		b, err2 := strconv.Atoi(minor)
		p.bad = p.bad || !ok || err1 != nil || err2 != nil || a < 1
		id.ProtoMajor, id.ProtoMinor = a, b
	},
	"fw":    func(id *Identity, p *idParser) { id.Firmware = p.rest },
	"board": func(id *Identity, p *idParser) { id.Board = p.word() },
	"boot":  func(id *Identity, p *idParser) { id.Boots, id.ResetCause = uint16(p.int(65535)), p.word() },
	"baud":  func(id *Identity, p *idParser) { id.Baud = p.int(20_000_000) },
	"loop":  func(id *Identity, p *idParser) { id.Loop = p.us() },
	"delay": func(id *Identity, p *idParser) { id.ComputeDelay = p.us() },
	"win":   func(id *Identity, p *idParser) { id.WindowLoops = p.int(10000) },
	"law":   func(id *Identity, p *idParser) { id.Law = p.oneOf("pi", "pid") },
	"form":  func(id *Identity, p *idParser) { id.Form = p.oneOf("parallel", "ideal", "series") },
	"deriv": func(id *Identity, p *idParser) { id.Derivative = p.oneOf("measurement", "error") },
	"disc": func(id *Identity, p *idParser) {
		id.Discretisation = p.oneOf("backward-euler", "forward-euler", "tustin", "incremental")
	},
	"windup": func(id *Identity, p *idParser) { id.AntiWindup = p.oneOf("none", "clamp", "back-calculation") },
	"num":    func(id *Identity, p *idParser) { id.Number = p.oneOf("float", "int") },
	"glsb": func(id *Identity, p *idParser) {
		for len(p.words) > 0 {
			id.GainLSB = append(id.GainLSB, p.float())
		}
	},
	"gains":  func(id *Identity, p *idParser) { id.GainNames = p.all() },
	"limits": func(id *Identity, p *idParser) { id.LimitNames = append(id.LimitNames, p.all()...) },
	"input":  func(id *Identity, p *idParser) { id.Input = p.oneOf("V", "duty", "dac", "A") },
	"bus": func(id *Identity, p *idParser) {
		id.BusMeasured = p.oneOf("measured", "nominal") == "measured"
		id.BusNominal = p.float()
	},
	"quad": func(id *Identity, p *idParser) { id.Quadrants = p.int(4) },
	"off":  func(id *Identity, p *idParser) { id.OffMeans = p.oneOf("coast", "short") },
	"enc": func(id *Identity, p *idParser) {
		id.CountsPerTurn, id.EncoderSide, id.GearRatio = p.float(), p.oneOf("motor", "load"), p.float()
	},
	"scale": func(id *Identity, p *idParser) {
		id.Scales = Scales{SpeedLSB: p.float(), VoltsLSB: p.float(), CurrentLSB: p.float(), BusLSB: p.float()}
	},
	"max": func(id *Identity, p *idParser) {
		id.VoltsMax, id.SpeedMax, id.AmpsMax = p.float(), p.float(), p.float()
	},
	"beat": func(id *Identity, p *idParser) {
		id.BeatMin = time.Duration(p.int(10000)) * time.Millisecond
		id.BeatMax = time.Duration(p.int(10000)) * time.Millisecond
	},
	"can":    func(id *Identity, p *idParser) { id.Powers = append(id.Powers, p.all()...) },
	"cap":    func(id *Identity, p *idParser) { id.CaptureN = p.int(10_000_000) },
	"inputs": func(id *Identity, p *idParser) { id.Inputs = append(id.Inputs, p.all()...) },
}
