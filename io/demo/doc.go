// Package demo makes the table of the demonstration: an invented oyster
// hatchery, 240 batches of larvae by 1,200 columns, from a seed.
//
// Every number is made up. Columns come in blocks that are correlated inside:
// water chemistry followed over ten days, feed rations, a microbiome panel
// whose members live in communities, and a few measurements of the spawning.
// Twelve columns matter for the outcome, the survival at day 21; Matter names
// them, so that the demonstration can say at its end which of them were found.
// The table also holds what real tables hold: a text identifier, a row number,
// a date written as text, a constant column, and a column that is another one
// in other units.
//
// The values depend on the seed alone: normal numbers are sums of uniform ones
// and every value is rounded to a few decimals, so no mathematical library can
// change them. Written with the same version of the Arrow library, the file is
// the same byte for byte.
package demo
