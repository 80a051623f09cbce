package resample

// MaxLanes is the largest number of draws in a block: as many as the solver
// takes through the table at once.
const MaxLanes = 16

// BlockSize returns how many draws a worker should fit together: at most
// draws/(4 workers), so that the last blocks do not leave workers idle and
// little is lost when one is interrupted; at most lanes; always even and at
// least 2, so that a pair stays in one block. Arguments below 1 count as 1.
func BlockSize(draws, workers, lanes int) int {
	size := min(draws/(4*max(workers, 1)), lanes)
	return max(size-size%2, 2)
}
