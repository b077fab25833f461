package trace

import "flag"

// Drawn cases are the same in every run; -rapid.seed=N on the command line draws
// others, and a failure prints the one that it came from.
func init() { _ = flag.Set("rapid.seed", "20261201") }
