package forecast

import "time"

// Clock tells time as a round sees it.
type Clock struct {
	Now       func() time.Time
	Processor func() (time.Duration, bool) // of this process so far; false: not known
}

// SystemClock is that of the machine.
func SystemClock() Clock { return Clock{Now: time.Now, Processor: processorTime} }
