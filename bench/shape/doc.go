// Package shape makes the seeded tables of the side-by-side comparison and
// keeps them in files that both sides read.
//
// Columns follow a first-order autoregression with coefficient 0.5 between
// neighbours, each with variance 1. A few columns picked at random carry the
// signal, with coefficients of either sign between 0.5 and 1.5, and noise is
// added for a given ratio of the signal's variance to the noise's. The outcome
// is that sum; whether it exceeds its median (yes-no); the largest of three such
// sums (classes); a Poisson count or a time to an event, with the signal in the
// logarithm of mean or hazard.
//
// Files are .npy (version 1.0, little endian): matrices of float64 in column
// order, matrices of int32 in row order.
package shape
