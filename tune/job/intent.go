package job

// Intent is what the person wants, as the screens say it. A stop is not an
// intent: it goes ahead of everything.
type Intent interface{ intent() }

// The intents.
type (
	// DoStep begins a step.
	DoStep struct{ Step StepID }
	// SkipStep leaves a step out, with a reason.
	SkipStep struct {
		Step   StepID
		Reason string
	}
	// GiveAnswer answers the question that waits.
	GiveAnswer struct{ Answer Answer }
	// Arm arms the plan that is shown.
	Arm struct{}
	// SayClear answers that the area is clear.
	SayClear struct{}
	// Go starts the count-down of an armed run.
	Go struct{}
	// Disarm withdraws the arm.
	Disarm struct{}
	// Decline puts the plan or the question aside.
	Decline struct{}
	// Acknowledge says that the trip or alarm was seen.
	Acknowledge struct{}
	// ResetTrip clears an acknowledged trip.
	ResetTrip struct{}
	// SetMark marks this moment of a run.
	SetMark struct{}
	// AddRemark keeps a remark.
	AddRemark struct{ Text string }
	// Nudge steps the size of a plan or the robustness bound, by ±1.
	Nudge struct{ By int }
	// PickGain goes on to the next gain on the design page, by ±1.
	PickGain struct{ By int }
	// TurnGain makes the gain in hand larger or smaller, by ±1.
	TurnGain struct{ By int }
	// TakeBack undoes the last change of a gain by hand.
	TakeBack struct{}
	// TakeOld takes the gains that the earlier record was left with.
	TakeOld struct{}
	// PickPort opens a port.
	PickPort struct{ Path string }
	// LookAgain lists the ports anew.
	LookAgain struct{}
	// TurnHand turns the shaft of a simulated rig by one turn.
	TurnHand struct{}
	// CyclePower switches a simulated board off and on.
	CyclePower struct{}
	// Revert pushes the as-found gains back.
	Revert struct{}
	// Quit ends the session; the motor is stopped first.
	Quit struct{}
)

func (DoStep) intent()      {}
func (SkipStep) intent()    {}
func (GiveAnswer) intent()  {}
func (Arm) intent()         {}
func (SayClear) intent()    {}
func (Go) intent()          {}
func (Disarm) intent()      {}
func (Decline) intent()     {}
func (Acknowledge) intent() {}
func (ResetTrip) intent()   {}
func (SetMark) intent()     {}
func (AddRemark) intent()   {}
func (Nudge) intent()       {}
func (PickGain) intent()    {}
func (TurnGain) intent()    {}
func (TakeBack) intent()    {}
func (TakeOld) intent()     {}
func (PickPort) intent()    {}
func (LookAgain) intent()   {}
func (TurnHand) intent()    {}
func (CyclePower) intent()  {}
func (Revert) intent()      {}
func (Quit) intent()        {}
