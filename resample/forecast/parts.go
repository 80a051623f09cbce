package forecast

import "time"

const (
	// night is how long a part should take at most, where more parts can
	// bring that about.
	night = 4 * time.Hour
	// worth is how many times longer than what it pays once a part's draws
	// should take.
	worth = 10
)

// Parts recommends a number of parts for a run whose draws take so long on one
// machine, where every part pays fixed beside. units is how many pairs (or
// draws) there are to share.
func Parts(draws, fixed time.Duration, units int) int {
	parts := int((draws + night - 1) / night)
	if fixed > 0 {
		parts = min(parts, int(draws/(worth*fixed)))
	}
	return max(1, min(parts, units))
}
