package resample

import "time"

// MaxLanes is the largest number of draws in a block: as many as the solver
// takes through the table at once.
const MaxLanes = 16

// DefaultRisk is the time that a block may take however short the run is.
const DefaultRisk = 5 * time.Minute

// riskShare is the part of a whole run that a block may take where that is
// longer than the risk: a tenth.
const riskShare = 10

// BlockSize returns how many draws a worker should fit together where time
// does not matter: at most draws/(4 workers), so that the last blocks do not
// leave workers idle; at most lanes; always even and at least 2, so that a
// pair stays in one block. Arguments below 1 count as 1.
func BlockSize(draws, workers, lanes int) int {
	size := min(draws/(4*max(workers, 1)), lanes)
	return max(size-size%2, 2)
}

// Sizing says how large the blocks of a run are. A block that is not finished
// is lost when the process is killed, so its size is also the work at risk.
type Sizing struct {
	Design  Design
	Draws   int           // draws that the run makes
	Workers int           // fits at a time; below 1: 1
	Limit   int           // most draws in a block; 0: MaxLanes
	Risk    time.Duration // a block may always take so long; 0: DefaultRisk
}

// Unit is the smallest block: a pair for Halves, otherwise one draw.
func (s Sizing) Unit() int {
	if s.Design == Halves {
		return 2
	}
	return 1
}

// Block returns the draws in a block where a worker needs perDraw for a draw:
// as many as fit into Allowed, at most what BlockSize gives, whole units, at
// least one. A perDraw of 0 means that nothing is known yet, and gives one
// unit.
func (s Sizing) Block(perDraw time.Duration) int {
	unit := s.Unit()
	if perDraw <= 0 {
		return unit
	}
	limit := s.Limit
	if limit == 0 {
		limit = MaxLanes
	}
	size := BlockSize(s.Draws, s.Workers, limit)
	size = min(size, int(min(s.Allowed(perDraw)/perDraw, MaxLanes*MaxLanes)))
	return max(size-size%unit, unit)
}

// Allowed is how long a block may take: Risk, or a tenth of the run's whole
// time, whichever is more.
func (s Sizing) Allowed(perDraw time.Duration) time.Duration {
	risk := s.Risk
	if risk == 0 {
		risk = DefaultRisk
	}
	return max(risk, s.Whole(perDraw)/riskShare)
}

// Whole is the time of the whole run, its draws shared evenly by the workers.
func (s Sizing) Whole(perDraw time.Duration) time.Duration {
	const longest = 1 << 62 // 146 years; beyond it a Duration has no room
	return time.Duration(min(float64(perDraw)*float64(s.Draws)/float64(max(s.Workers, 1)), longest))
}

// AtRisk is the running time that is lost when the process is killed at the
// worst moment, just before every worker finishes a block. It exceeds Allowed
// only where a single unit does.
func (s Sizing) AtRisk(perDraw time.Duration) time.Duration {
	return time.Duration(min(s.Block(perDraw), s.Draws)) * perDraw
}
