package job

// Info is what the path says of a step before it is done.
type Info struct {
	ID                              StepID
	Title                           string
	For, Needs, Moves, Takes, Gives string
	needs                           []StepID // that must be done before it
	// Optional steps stand at their place and are done by going there, or because
	// a job file lists them; nothing else needs them and the way onward passes them.
	Optional bool
	// Sized steps have a size that a person may change before the arm.
	Sized bool
}

// Path is the order of work. A person may go straight to any step whose needs
// are met, and back to any step: what was found stays until it is found anew.
var Path = []Info{
	{ID: StepPort, Title: "Port", For: "choose the line to the board",
		Needs: "cable in, board powered", Moves: "nothing; opening may restart the board", Takes: "seconds", Gives: "an open line"},
	{ID: StepIdentity, Title: "Identity, as-found", For: "ask the board what it is and keep what it holds, before anything is touched",
		Needs: "an open line", Moves: "nothing", Takes: "a few seconds", Gives: "as-found: gains running and stored, limits, flags; limits held by the board",
		needs: []StepID{StepPort}},
	{ID: StepSwap, Title: "Part swap", For: "note which part was swapped, and what the difference will do before anything moves",
		Needs: "identity; the labels of old and new part", Moves: "nothing", Takes: "a few minutes", Gives: "part record, predicted speed error, loop gain and phase margin; lockout and test run answered",
		needs: []StepID{StepIdentity}, Optional: true},
	{ID: StepCount, Title: "Count check", For: "see that one turn of the shaft reads as one turn",
		Needs: "your hand on the shaft, drive off", Moves: "nothing; you turn the shaft", Takes: "half a minute", Gives: "counts per turn",
		needs: []StepID{StepIdentity}},
	{ID: StepTiming, Title: "Clock and zeros", For: "the board's real loop period and jitter, and what its sensors read at rest",
		Needs: "count check, drive off", Moves: "nothing", Takes: "a few seconds", Gives: "loop period, jitter with quick and slow telemetry, zeros, bus against a meter",
		needs: []StepID{StepCount}, Optional: true},
	{ID: StepSign, Title: "Sign check", For: "see that positive drive turns the shaft the positive way",
		Needs: "count check, area clear", Moves: "a slow ramp each way, ended by the first counts", Takes: "a few seconds a way", Gives: "sign of the encoder, first idea of breakaway",
		needs: []StepID{StepCount}},
	{ID: StepStop, Title: "Stop check", For: "see the stop key work, at rest and at creep speed",
		Needs: "sign check, area clear", Moves: "creep speed until you press the stop key", Takes: "half a minute", Gives: "time from key to wire to board",
		needs: []StepID{StepSign}},
	{ID: StepSilence, Title: "Silence check", For: "see the board stop by itself when the console goes silent",
		Needs: "stop check, area clear", Moves: "creep speed, then the board cuts", Takes: "a few seconds", Gives: "board timeout, measured on the board's clock",
		needs: []StepID{StepStop}},
	{ID: StepInterlocks, Title: "Interlock check", For: "see every input that the rig file names in both states, and stop the shaft by each",
		Needs: "silence check, somebody at the inputs, area clear", Moves: "creep speed, until an input is opened", Takes: "a minute an input", Gives: "witnessed table: states, who stopped it, time and angle to rest",
		needs: []StepID{StepSilence}},
	{ID: StepLimits, Title: "Limit check", For: "see a trip of the board work: the speed ceiling is set low, provoked, and set back",
		Needs: "silence check, area clear", Moves: "up to a low speed, then the board trips", Takes: "a few seconds", Gives: "trip speed, limits set back and read back",
		needs: []StepID{StepSilence}},
	{ID: StepInch, Title: "Inch", For: "move the shaft a little, one bounded inch for each press",
		Needs: "checks seen working, area clear", Moves: "one inch for each g, by the angle and time of the rig file; any other key disarms", Takes: "as long as the arm", Gives: "the shaft where you want it",
		needs: []StepID{StepSilence}, Optional: true},
	{ID: StepBreakaway, Title: "Breakaway", For: "find the voltage at which the shaft starts to turn, both ways",
		Needs: "checks seen working", Moves: "slow ramps, each ended by the first motion", Takes: "half a minute", Gives: "breakaway volts each way with ±",
		needs: []StepID{StepInterlocks, StepLimits}},
	{ID: StepResistance, Title: "Resistance", For: "winding resistance at several angles, with the shaft at rest",
		Needs: "breakaway, a current sensor", Moves: "nothing: levels below breakaway; you turn the shaft between them", Takes: "a minute", Gives: "R with ±, its scatter over angles",
		needs: []StepID{StepBreakaway}, Optional: true},
	{ID: StepStaircase, Title: "Staircase", For: "steady speed against voltage, up and down, both ways",
		Needs: "breakaway", Moves: "levels of voltage up to the size shown", Takes: "half a minute", Gives: "gain, friction each way, first time constant",
		needs: []StepID{StepBreakaway}},
	{ID: StepRunUp, Title: "Run-up", For: "the way up to the highest speed in five levels, with a look and a note at each",
		Needs: "staircase, area clear", Moves: "10, 25, 50, 75 and 100 % of what the limits leave, each a run of its own", Takes: "a minute or two", Gives: "speed, current and ripple of each level, and what was noted",
		needs: []StepID{StepStaircase}, Optional: true},
	{ID: StepReversal, Title: "Reversal", For: "lost motion: what the motor turns before the encoder sees it",
		Needs: "staircase, a current sensor, area clear", Moves: "slow ramps, two each way in turn, each ended by the first motion", Takes: "half a minute", Gives: "lost motion in rad and counts with ±",
		needs: []StepID{StepStaircase}, Optional: true},
	{ID: StepWarmUp, Title: "Warm-up", For: "run until repeats agree, so that the numbers after it stay",
		Needs: "staircase, area clear", Moves: "half of top speed, steadily", Takes: "until it agrees, a minute at most each run", Gives: "how far it moved, how well repeats agree",
		needs: []StepID{StepStaircase}, Optional: true},
	{ID: StepCoast, Title: "Coast-down", For: "friction by itself: how the shaft slows down with the output off",
		Needs: "staircase, area clear", Moves: "up to half of top speed, then it coasts, three times a way", Takes: "a minute or two", Gives: "dry and viscous friction over inertia, each way with ±",
		needs: []StepID{StepStaircase}, Optional: true},
	{ID: StepStep, Sized: true, Title: "Step test", For: "the quick part of the motion: time constant and dead time",
		Needs: "staircase", Moves: "small steps about a middle speed", Takes: "ten seconds", Gives: "the record the model is fitted on",
		needs: []StepID{StepStaircase}},
	{ID: StepSecond, Sized: true, Title: "Second test", For: "a record of another kind that the model has not seen",
		Needs: "step test", Moves: "a pseudo-random pattern about a middle speed", Takes: "ten seconds", Gives: "the record the model is judged on",
		needs: []StepID{StepStep}},
	{ID: StepRelay, Title: "Relay feedback", For: "gain, time constant and dead time from a limit cycle: another way to the same numbers",
		Needs: "step test, area clear", Moves: "to and fro about a middle speed, twice, some twenty cycles", Takes: "half a minute", Gives: "gain from two middles, ultimate gain and period, each with ±",
		needs: []StepID{StepStep}, Optional: true},
	{ID: StepFit, Title: "Model", For: "fit, and judge on what the fit has not seen",
		Needs: "step test; second test for a full verdict", Moves: "nothing", Takes: "a second", Gives: "gain, time constant, dead time, each with ±; a verdict",
		needs: []StepID{StepStep}},
	{ID: StepFrequency, Title: "Frequency response", For: "gain and phase at many frequencies over the model, and what stands out",
		Needs: "a model, area clear", Moves: "a sum of sines about the middle speed", Takes: "ten to thirty seconds", Gives: "response with coherence, peaks, how far the model is from it",
		needs: []StepID{StepFit}, Optional: true},
	{ID: StepMap, Title: "Gain map", For: "gain and time constant at other speeds, each way: how far the model may be believed",
		Needs: "a model, area clear", Moves: "small steps about three speeds, each way", Takes: "a minute", Gives: "gain and time constant over speed with ±, the range the model holds in",
		needs: []StepID{StepFit}, Optional: true},
	{ID: StepFound, Title: "As-found trace", For: "keep how the loop ran as it was found, to set the result against",
		Needs: "a model that is not refused, area clear; may be declined", Moves: "a small step about 20 % of top speed in closed loop, with the gains as found", Takes: "a few seconds", Gives: "overshoot, settling and ripple as found",
		needs: []StepID{StepFit}},
	{ID: StepDesign, Title: "Proposal", For: "gains that keep their margins on the real sampled loop",
		Needs: "a model that is not refused", Moves: "nothing", Takes: "a second", Gives: "gains, margins, forecast, worst case",
		needs: []StepID{StepFit}},
	{ID: StepPush, Title: "Push", For: "write the proposed gains to the board's memory that a power cut forgets",
		Needs: "a proposal, disarmed and still", Moves: "nothing", Takes: "seconds", Gives: "gains running, read back bit by bit",
		needs: []StepID{StepDesign}},
	{ID: StepFirstLoop, Title: "First closed loop", For: "see the loop hold, with tight limits and a low setpoint",
		Needs: "gains pushed, area clear", Moves: "20 % of top speed for 3 s in closed loop", Takes: "a few seconds", Gives: "the loop holds, or not",
		needs: []StepID{StepPush}},
	{ID: StepVerify, Title: "Verify", For: "measured against forecast and against the targets",
		Needs: "first closed loop", Moves: "setpoint steps both ways in closed loop", Takes: "ten seconds", Gives: "pass or fail per target",
		needs: []StepID{StepFirstLoop}},
	{ID: StepStore, Title: "Store", For: "keep the gains through a power cut, and see that they were kept",
		Needs: "verify", Moves: "nothing; you switch the board off and on", Takes: "a minute", Gives: "stored gains read back equal after a restart",
		needs: []StepID{StepVerify}},
	{ID: StepAcceptance, Title: "Acceptance", For: "the acceptance list of the rig file, line by line, passed or failed",
		Needs: "identity; a witness", Moves: "nothing", Takes: "a minute or two", Gives: "acceptance list with who witnessed",
		needs: []StepID{StepIdentity}, Optional: true},
	{ID: StepAsLeft, Title: "As-left", For: "keep what the board holds now, the last look before you go",
		Needs: "nothing but the line", Moves: "nothing", Takes: "seconds", Gives: "as-left: gains, limits, flags",
		needs: []StepID{StepIdentity}},
	{ID: StepCard, Title: "Card", For: "one page to print, sign and leave with the machine",
		Needs: "as-left", Moves: "nothing", Takes: "a moment", Gives: "card and sticker line",
		needs: []StepID{StepAsLeft}},
}

// info returns what the path says of a step.
func info(id StepID) *Info {
	for i := range Path {
		if Path[i].ID == id {
			return &Path[i]
		}
	}
	panic("job: unknown step " + string(id))
}
