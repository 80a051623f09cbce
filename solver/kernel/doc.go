// Package kernel holds the inner loops that a fit lives on, each with one
// written order of addition, so that the bits of a result depend on nothing
// but its input.
//
// # The two orders
//
// Record sums (Sum, Dot) are what printed and stored numbers are made of.
// Rows are taken in chunks of Chunk. Within a chunk, element i goes to the
// partial sum i mod 8 by one fused multiply-add; the eight partial sums are
// reduced as ((0+4)+(2+6)) + ((1+5)+(3+7)); the chunk totals are added in
// order. A vector unit of two, four or eight lanes can keep this order.
//
// Lane sums (Lanes) multiply one column with up to sixteen row-major lanes:
// lane l accumulates its rows in order by fused multiply-add within a chunk,
// and the chunk totals are added in order.
//
// Element-wise functions (AddScaled, AddScaled4, Gather) have no order of
// addition between elements; each element is one chain of fused
// multiply-adds, written at the function.
//
// Screening functions (DotRows, Moments, SquaredDistance) serve numbers that
// only propose or exclude by a proven margin; their order is fixed too, but no
// stored number depends on it. They round product and sum apart: without
// vector instructions that is half as fast again as math.FMA, which asks the
// processor each time whether it has the instruction.
//
// # Special values
//
// NaN and infinities propagate as IEEE 754 arithmetic has it. Empty input
// gives 0. Slices of unequal length where equal ones are asked for panic:
// that is a caller's mistake that no input file can cause.
//
// Inputs are read only, outputs are overwritten or added to as each function
// says. All functions are safe for concurrent use on distinct outputs.
package kernel

// Chunk is the number of rows summed before a partial total is carried on.
// Sums of a million terms then have an error growth of about 128 + 1,000
// additions in place of a million.
const Chunk = 1024

// MaxLanes is the largest number of lanes that one pass over a column serves.
const MaxLanes = 16

// Name returns the name of the kernel in use, as recorded with a run.
func Name() string { return "portable" }
