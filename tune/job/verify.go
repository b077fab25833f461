package job

func (j *Job) doDesign() (result, error)    { return "", nil }
func (j *Job) doFirstLoop() (result, error) { return "", nil }
func (j *Job) doVerify() (result, error)    { return "", nil }
func (j *Job) doCard() (result, error)      { return "", nil }

// Nudge steps the robustness bound.
func (j *Job) Nudge(by int) {}
