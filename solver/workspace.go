package solver

import (
	"math"

	"holdfast/solver/kernel"
)

// Shape is what the memory that fits take depends on.
type Shape struct {
	Rows       int // of the table
	DrawRows   int // of a draw
	Candidates int
	Always     int
	Steps      int     // lattice steps of a complete path
	StopAfter  int     // distinct candidates that end a path; 0: none
	Mix        float64 // of the penalty; 0: 1, the lasso
	Columns    int     // of all candidates; 0: as many as candidates, no groups
	Classes    int     // coefficients of each column; 0: 1
	Curved     bool    // not a numeric outcome on single columns alone
}

// Shape returns that of the model's draws of so many rows.
func (m *Model) Shape(drawRows int) Shape {
	return Shape{
		Rows: m.rows, DrawRows: drawRows, Candidates: m.candidates(), Always: len(m.p.Always),
		Steps: m.last + 1, StopAfter: m.p.StopAfter, Mix: m.p.Mix,
		Columns: len(m.Terms()), Classes: m.lanes(), Curved: !m.exact,
	}
}

// Steps is how many lattice steps lie from 1 down to floor.
func Steps(ratio, floor float64) int {
	return 1 + max(0, lattice{top: 1, ratio: ratio}.lastAbove(floor))
}

// BlockLimit is that of a model of this shape. A lasso that stops late holds
// about a hundred columns at the usual floors; an elastic net may hold many
// more than it has rows.
func (s Shape) BlockLimit() int {
	columns := min(s.Candidates, max(s.DrawRows, 1), 100)
	bytes := int64(8 * max(s.DrawRows, 1) * columns)
	if s.elasticNet() || s.Curved {
		bytes = s.Workspace(1)
	}
	return int(max(2, min(kernel.MaxLanes, blockBytes/max(bytes, 1))))
}

// elasticNet reports whether supports may exceed the rows of a draw.
func (s Shape) elasticNet() bool { return s.Mix > 0 && s.Mix < 1 }

// Bytes and counts that were fitted to measurements (TestWorkspace holds them
// to live memory).
const (
	perCandidate = 32  // screening numbers of one candidate in one draw
	perWindow    = 12  // more of them where the window is longer than a step
	workingShare = 1.6 // working set over candidates that entered
	perPlace     = 18  // Gram matrix, factor and records, per place squared
	perCarried   = 3   // columns that Hessians are made of, per coefficient
	perPair      = 40  // Hessians and factors, per coefficient squared
	perDraw      = 16 << 10
	vectors      = 11 // of a draw's rows: outcome, residuals, lanes
)

// classesIn is in how many classes a column is that has entered, together with what
// the Hessians of an even number of classes hold beside.
func classesIn(lanes float64) float64 {
	if lanes == 1 {
		return 1
	}
	return 2.3
}

// Workspace estimates the bytes that one worker holds at the end of a block of
// so many draws, beside the table: for each draw the screening numbers of all
// candidates, the gathered columns and the Gram matrix of its working set, and
// the score vectors kept as references.
func (s Shape) Workspace(draws int) int64 {
	entered := float64(s.DrawRows)
	if s.elasticNet() {
		entered /= s.Mix // measured with 100 rows and mix 0.02: 1,461 in at a floor of 0.05
	}
	entered = min(entered, float64(s.Candidates))
	steps := float64(s.Steps)
	if s.StopAfter > 0 && float64(s.StopAfter) < entered {
		entered, steps = float64(s.StopAfter), steps/2 // such paths end about half way
	} else {
		entered /= 2 // far fewer fit the noise down to a usual floor
	}
	width := 1.0
	if s.Columns > s.Candidates {
		width = float64(s.Columns) / float64(s.Candidates)
	}
	lanes := float64(max(1, s.Classes))
	places := float64(s.Always) + float64(width*min(float64(s.Candidates), workingShare*entered))
	row := 8 * float64(s.DrawRows)
	candidate, references := float64(perCandidate), steps
	if s.Rows >= 2*s.Candidates && !s.Curved {
		candidate += perWindow
		references /= firstWindow
	}
	draw := float64(candidate*float64(s.Candidates)) + float64(row*(places+float64(vectors*lanes))) +
		min(snapshotBytes, row*lanes*references) + float64(8*entered*width*lanes*steps)
	if s.Curved {
		coefficients := (float64(s.Always) + 1 + float64(width*entered)) * classesIn(lanes)
		draw += float64(row*perCarried*coefficients) + float64(perPair*coefficients*coefficients)
	} else {
		draw += float64(perPlace * places * places)
	}
	return int64(math.Ceil((draw + perDraw) * float64(draws)))
}
