package job

func (j *Job) doDesign() (result, error)    { return "", nil }
func (j *Job) doFirstLoop() (result, error) { return "", nil }
func (j *Job) doVerify() (result, error)    { return "", nil }
func (j *Job) doCard() (result, error)      { return "", nil }
