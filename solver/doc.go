// Package solver fits penalised regressions for many draws of rows on one
// shared table.
//
// A Design is the immutable table; a Sample is one draw of its rows; a Problem
// adds the outcome, the penalty and the lattice of lambdas; a Model is a
// Problem made ready. FitBlock returns the Path of each draw: its certified
// fits from the first lattice step with no candidate to the floor. FitAt and
// FitPath are single fits, without draws.
//
//	minimise (1/N) sum_i w_i loss(y_i, eta_i)
//	         + lambda sum_j v_j [ mix |s_j b_j| + (1-mix)/2 (s_j b_j)^2 ]
//
// with s_j the column's standard deviation over the draw's own rows (or over
// the table, or 1). Always-in columns and the intercept are not penalised.
//
// # Steps of a path
//
//  1. fitting.start gathers the draw's rows, fits the always-in columns and
//     measures every candidate's mean, deviation and gradient over the draw.
//  2. activeSet.solve finds the exact optimum on the working set, the few
//     candidates looked at so far, from their Gram matrix.
//  3. screen.answer finds the candidates outside that may violate, for all
//     draws of a block at once. A gradient computed before, and the distance
//     of the residual from where it was computed, exclude most candidates
//     without touching the table (Cauchy-Schwarz).
//  4. Violators join the working set; back to 2. When there are none,
//     fitting.acceptStep has the step finished and certified.
//
// # Two sorts of numbers
//
// Screening numbers may only propose a candidate, or exclude one by a proven
// margin. They depend on history: on the block, the order, the machine. Record
// numbers are all that is stored: finish makes them from the draw, the lattice
// and the certified supports so far, by sums in one written order (package
// kernel). So a Path has the same bits for any number of workers, any block
// and any way the solution was found; TestHistories holds this.
//
// # Selected
//
// A candidate is selected where its coefficient is not zero at a certified
// optimum: the largest violation of the optimality conditions and the relative
// duality gap are at most 1e-10. One margin (border) decides both sides of the
// threshold. Where the candidates at the border are linearly dependent within the
// draw (columns that coincide there, indicators that add up) the optimum is not
// unique: the one with the least sum of weight*b^2 is taken, so that candidates
// that can stand in for each other enter together and share the fit, in equal
// parts where they coincide (sharing). A candidate that does not
// vary in a draw is never selected there. A step that cannot be certified ends
// the path at the step before, and the Path says why.
//
// # Sharing and memory
//
// A Model is immutable and safe for any number of goroutines; it keeps the
// slices of its Problem. A block needs, per draw, 24 bytes per candidate, its
// working set's columns and Gram matrix, and up to 64 MB of residuals kept as
// references.
//
// # Sources
//
// Tibshirani et al. 2012, JRSS-B 74:245-266 (strong rules); Osborne, Presnell
// & Turlach 2000, IMA J. Numer. Anal. 20:389-403 (active sets for the lasso);
// Golub & Van Loan, Matrix Computations (downdating a Cholesky factor).
package solver
