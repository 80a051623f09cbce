// Package solver fits penalised regressions for many draws of rows on one
// shared table.
//
// A Design is the immutable table; a Sample is one draw of its rows; a Problem
// adds the outcome, the penalty and the lattice of lambdas; a Model is a
// Problem made ready. FitBlock returns the Path of each draw: its certified
// fits from the first lattice step with no candidate to the floor. FitAt and
// FitPath are single fits, without draws.
//
//	minimise (1/N) sum_i w_i loss(y_i, o_i + eta_i)
//	         + lambda sum_j v_j [ mix r_j + (1-mix)/2 r_j^2 ]
//
// with r_j = |s_j b_j| and s_j the column's standard deviation over the draw's own
// rows (or over the table, or 1), or for a group r_j = ||X_j b_j||/sqrt(N) on its
// centred columns. Losses are those of Family; Multinomial has one coefficient
// per class, and r_j for each. Always-in columns and the intercept are not
// penalised. Unpenalised coefficients of Multinomial sum to zero over classes.
//
// # Steps of a path
//
//  1. fitting.start gathers the draw's rows, fits the always-in columns and
//     measures every candidate's mean, deviation and gradient over the draw; of
//     a group it makes an orthonormal block.
//  2. The core finds the optimum on the working set, the few candidates looked
//     at so far: exact from their Gram matrix, curved by proximal Newton steps.
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
// numbers are all that is stored: the finish makes them from the draw, the lattice
// and the certified supports so far, by sums in one written order (package
// kernel). So a Path has the same bits for any number of workers, any block
// and any way the solution was found; TestHistories holds this.
//
// # Selected
//
// A candidate is selected where its coefficient is not zero at a certified
// optimum: the largest violation of the optimality conditions is at most 1e-8, for
// a numeric outcome 1e-10 and the relative duality gap too. One margin (border) decides both sides of the
// threshold. Where the candidates at the border are linearly dependent within the
// draw (columns that coincide there, indicators that add up) the optimum is not
// unique: the one with the least sum of weight*b^2 is taken, so that candidates
// that can stand in for each other enter together and share the fit, in equal
// parts where they coincide (sharing). Classes of an even number, all of which a
// candidate is in for, lie around the midpoint of their median interval. A candidate that does not
// vary in a draw is never selected there. A step that cannot be certified ends
// the path at the step before, and the Path says why. Where the outcome can be told
// without error by columns that are not penalised there is no fit: a
// SeparationError names the column.
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
// Lee, Sun & Saunders 2014, SIAM J. Optim. 24:1420-1443 (proximal Newton steps);
// Simon & Tibshirani 2012, Statistica Sinica 22:983-1001 (standardised groups);
// Cox 1972, JRSS-B 34:187-220, Breslow 1974, Biometrics 30:89-99, Efron 1977, JASA
// 72:557-565 (partial likelihood and ties);
// Golub & Van Loan, Matrix Computations (downdating a Cholesky factor).
package solver
