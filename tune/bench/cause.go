package bench

import (
	"errors"
	"strings"

	"gainwright/safety"
	"gainwright/tune/job"
)

// The words of causes are those of simrig's faults, and a few of our own. They
// are for tables and tests; a person reads the refusal itself.
var causeWords = map[int]string{
	702: "no-identity", 710: "encoder-slips", 712: "encoder-reversed", 713: "encoder-reversed", 714: "stalled", 716: "no-timeout",
	717: "lies-about-limits", 719: "arms-on-old-number", 726: "stale-sequence", 727: "resets-itself", 728: "gravity", 729: "lost-motion",
	746: "stored-gains-differ", 783: "ignores-inputs", 760: "encoder-dead", 761: "wrong-crc", 762: "ignores-cut", 763: "mute",
	int(safety.CodeStale): "mute", int(safety.CodeLinkLost): "mute", int(safety.CodeRestarted): "resets-itself", int(safety.CodeBoardNoTime): "no-timeout",
	int(safety.CodeBusLow): "supply-folds", int(safety.CodeStalled): "stalled", int(safety.CodeNoCounts): "encoder-dead", int(safety.CodeStallOrDead): "stalled",
	int(safety.CodeWrongWay): "encoder-reversed", int(safety.CodeSlip): "encoder-slips", int(safety.CodeNoStopAnswer): "ignores-cut",
}

// causeOf is the word for what an error names; "" where it names no fault of the
// rig.
func causeOf(err error) string {
	var r *job.RefusedError
	if !errors.As(err, &r) {
		return ""
	}
	if w := causeWords[r.Number]; w != "" {
		return w
	}
	if strings.Contains(r.Cause, "does not answer") {
		return "mute"
	}
	for _, w := range []string{"resonance", "gravity"} {
		if strings.Contains(r.Cause, w) {
			return w
		}
	}
	return ""
}
