// Package selection turns the outcomes of many draws of rows into a judgement:
// how often each predictor was chosen, which predictors are stable, and how
// many of them could be there by luck. It is pure statistics: it opens no file
// and knows nothing of how a draw was fitted.
//
// # Vocabulary
//
//   - draw: one random half of the rows (or one bootstrap sample) and the
//     penalised path fitted on it. Draws 2k and 2k+1 are complementary pair k:
//     two disjoint halves of equal size.
//   - entry: the first lattice step at which a predictor is chosen in a draw.
//   - term: one design column of a predictor: the column itself, a member of a
//     group, the indicator of a category's level. A group or a category is
//     chosen as a whole and counts one.
//   - class: a level of an outcome of classes, for which every term has a
//     coefficient of its own.
//   - region: the part of a draw's path that counts (Cap or Common).
//   - selected, q: the most predictors that a draw may contribute.
//   - candidates, p: the predictors that could have been chosen.
//   - need: the smallest count of draws that makes a predictor stable;
//     attained = need/draws is the threshold that is reached in fact.
//   - false selections, E(V): the expected number of stable predictors that
//     were unlikely to be chosen in any one half (chosen with a chance of at
//     most q/p). It is an expectation, not a rate and not a probability.
//   - ceiling: the share of draws in which a candidate varied at all.
//
// # Steps
//
// SolveBudget ties threshold, selected and false selections before any fit.
// Decide turns what a study asks into a Decision, Change does the same for a
// second look. Judge applies a Decision to the draws: region, counts, pairs,
// intervals, quantiles, bounds, warnings; what has several coefficients has none
// in its row, and Judgement.Terms lists them. Every decision is made on integer
// counts; a frequency is only ever printed.
//
// Nothing here keeps or changes what it is given, except that a Judgement
// keeps the draws to list the paths. Functions may be called from several
// goroutines at once; the same input gives the same bits.
//
// # Papers
//
// Meinshausen and Buhlmann (2010), JRSS-B 72, 417-473: the worst-case bound.
// Shah and Samworth (2013), JRSS-B 75, 55-80: complementary pairs, the unimodal
// and the r-concave bound. Wilson (1927), JASA 22, 209-212: the interval.
// Hyndman and Fan (1996), Am. Stat. 50, 361-365: quantiles of type 7.
package selection
