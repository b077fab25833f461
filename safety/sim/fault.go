package sim

// Fault is one thing that goes wrong in a world for a while.
type Fault uint8

// The faults: of the wire, of the board, of sensors and motor, of the laptop and
// of the person in front of it.
const (
	NoFault   Fault = iota
	Loss            // most lines are lost, both ways
	Delay           // lines take up to 400 ms
	Repeat          // lines and samples come twice
	Unplug          // the port goes away and comes back
	Deaf            // the board hears nothing
	Mute            // the board says nothing
	NoTimeout       // the board keeps no timeout and is deaf
	Restart         // the board starts anew
	RampDeaf        // the board ignores a ramp
	RampStuck       // the board says that it ramps and drives on
	Frozen          // counts stand still
	Dead            // the encoder is dead from the start of motion
	Negated         // the encoder counts backwards
	Slip            // the encoder's coupling slips by half
	NaN             // the speed is not a number
	Stall           // the shaft is stuck
	Loose           // most of the inertia has come off
	Sag             // the supply folds back
	Surge           // the bus is high
	Short           // the current is far too high
	Guard           // an interlock is open
	FrozenUI        // the screen shows no frame
	DiskFull        // the record cannot be written
	ClockBack       // the laptop's clock goes back
	ClockOn         // the laptop's clock jumps ahead
	Sleep           // the laptop sleeps
	PortStall       // a write does not end
	RigEdit         // somebody edits the rig file
	Hostile         // every key at any time
	PasteText       // 200 characters at once
	FaultEnd
)

var faultWords = [...]string{"none", "loss", "delay", "repeat", "unplug", "deaf", "mute", "no-timeout", "restart",
	"ramp-deaf", "ramp-stuck", "frozen", "dead", "negated", "slip", "nan", "stall", "loose", "sag", "surge", "short",
	"guard", "frozen-screen", "disk-full", "clock-back", "clock-on", "sleep", "port-stall", "rig-edit", "hostile", "paste"}

// String returns the fault's name.
func (f Fault) String() string { return faultWords[f] }

// obeys reports whether the board keeps its timeout under the fault.
func (f Fault) obeys() bool { return f != NoTimeout }

// truthful reports whether the speed it tells is the shaft's, at least in size.
func (f Fault) truthful() bool {
	switch f {
	case Frozen, Dead, Slip, NoTimeout, Deaf, Mute, Loss, Delay, Loose, Negated, NaN, RampStuck:
		return false
	}
	return true
}
