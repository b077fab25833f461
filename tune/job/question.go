package job

// QuestionKind says what answer a question takes.
type QuestionKind string

// The kinds of questions.
const (
	AskYesNo    QuestionKind = "yes-no"
	AskEnter    QuestionKind = "enter"     // seen; go on
	AskWord     QuestionKind = "word"      // type Want exactly
	AskText     QuestionKind = "text"      // free text
	AskNumber   QuestionKind = "number"    // a number in Unit
	AskHandTurn QuestionKind = "hand-turn" // turn the shaft, then enter; the live count is shown
	AskStopKey  QuestionKind = "stop-key"  // press the stop key
	AskPower    QuestionKind = "power"     // switch the board off and on
	AskInput    QuestionKind = "input"     // work the inputs of Set; answered by the board
	AskChoice   QuestionKind = "choice"    // one of Options, by its number
)

// Question waits for the person.
type Question struct {
	ID      int
	Kind    QuestionKind
	Text    string
	Detail  []string // lines below it
	Want    string   // for AskWord
	Unit    string   // for AskNumber
	Default string
	Blank   bool       // for AskNumber: enter alone is an answer too, not known
	Options []string   // for AskChoice, at most nine
	Set     []InputBit // for AskInput
	// Override asks for a reason to do what was refused: nobody but a person has one.
	Override bool
}

// Answer is what the person said.
type Answer struct {
	ID   int
	Yes  bool
	Text string
}

// InputBit is a state of one input of the board: its bit, and whether it is in
// its working position.
type InputBit struct {
	Bit     uint8
	Working bool
}

// InterlockView is one row of the interlock table.
type InterlockView struct {
	Name   string
	Bit    int
	Seen   string // states seen at rest, in words
	Stop   string // who stopped it at creep, in what time and angle
	Now    string // position now, in words
	Passed string // "", passed or failed
}

// WorkInput has the input that a question asks for worked on a simulated rig.
type WorkInput struct{}

func (WorkInput) intent() {}
