// Package demo makes the tables of the demonstration, all of one invented
// oyster hatchery, from a seed.
//
// # The larvae
//
// Make: 240 batches of larvae by 1,200 columns. Every number is made up. Columns come in blocks that are correlated inside:
// water chemistry followed over ten days, feed rations, a microbiome panel
// whose members live in communities, and a few measurements of the spawning.
// Twelve columns matter for the outcome, the survival at day 21; Matter names
// them, so that the demonstration can say at its end which of them were found.
// The table also holds what real tables hold: a text identifier, a row number,
// a date written as text, a constant column, and a column that is another one
// in other units.
//
// # The batches
//
// MakeBatches: 600 batches of another year, with what became of them, for
// outcomes that are no numbers. Some batches are lost; the others settle on
// some day, or have not when watching ends; some come from elsewhere and are
// watched from then on. Losses follow a logistic law and days of settling a
// Weibull law with proportional hazards, each with effects of a few columns, of
// the site, and of a category. Studies holds the studies of this table, with
// what they should find.
//
// # Sameness
//
// The values depend on the seed alone: normal numbers are sums of uniform ones
// and every value is rounded to a few decimals or to whole days, so the last
// bits of a mathematical library do not show. Written with the same version of the Arrow library, the file is
// the same byte for byte.
package demo
