//go:build !unix

package forecast

import "time"

func processorTime() (time.Duration, bool) { return 0, false }
