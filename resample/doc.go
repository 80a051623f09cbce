// Package resample says which rows are in which draw, and has a pool of
// workers that fits the draws in blocks and hands the outcomes on.
//
// # Vocabulary
//
//   - A unit is what is drawn: a row of the table whose case weight is not 0.
//   - A draw is one set of row counts, numbered from 0.
//   - A complementary pair is draws 2k and 2k+1: two disjoint halves of
//     floor(n/2) of the n units each. Where n is odd, one unit, chosen at
//     random, is in neither.
//   - A bootstrap draw takes n units with replacement.
//   - Strata are rows that are drawn apart from all others: floor(n_s/2) of the
//     n_s units of each for either half, one unit of each odd stratum left over
//     at random; for a bootstrap n_s of n_s. A stratum of one unit is in no half
//     ([Plan.Lone]). Half is then the sum over strata.
//   - W is a candidate's number in a draw, for a randomised lasso: uniform on
//     [jitter, 1], another one in each half of a pair.
//   - What is left of a draw is the partner half, or the units that a bootstrap
//     did not draw: rows that the fit has not seen.
//   - A redraw is a pair made anew as a whole because one of its halves cannot
//     be fitted at all ([Plan].Fit); at most [MaxRedraws] times.
//   - A block is the draws that one worker fits together; both halves of a pair
//     are in the same one.
//   - A part is a share of the draws: pair k (bootstrap: draw k) is in part
//     k mod N.
//
// # Sameness
//
// Every attempt at a pair (a bootstrap draw) has a generator of its own, keyed by
// its design, the seed, its number, and how often it was made anew. So any draw
// can be made anywhere and in any order, and neither the number of draws nor the
// number of workers can change it. W is a digest of seed, draw and the
// candidate's name, so that neither the order of columns nor another candidate
// changes it. The stream is ChaCha8 as math/rand/v2 has it, whose output is
// part of a written specification; the integers below a limit and the
// shuffle are written here, so that a later library cannot change a draw. A
// test pins the first draws.
//
// # What the bounds ask for
//
// The halves of a pair must be independent draws of one law, given what they
// share. Strata fixed beforehand keep that; strata of the outcome's class or
// event status keep it given the numbers of each (STATISTICS 10). A pair made
// anew is a pair given that both halves can be fitted, which concerns the outcome
// and the always-in columns, not the candidates.
//
// # The pool
//
// [Run] deals out blocks of the draws that are to be made, lets each worker
// take the next block when it is free, and gives every block to one [Sink] as
// soon as it is finished. The order in which blocks come means nothing: a draw
// is known by its number, and whoever adds draws up does so in the order of
// numbers. Nothing finished waits for anything but the sink, so that as little
// as possible is lost when the process is killed.
//
// The first blocks are a pair for each worker. From the time they take follows
// how large the later ones may be ([Sizing]): large enough that draws share
// their passes over the table, and so small that a block is finished within
// five minutes, or a tenth of the run, whichever is more. Sizes change what is
// at risk and how fast it goes, never a bit of a draw.
//
// A run ends early in two ways. [Options].Stop is the gentle one: nothing new
// is begun, blocks in work are finished and put. The end of the context is the
// hard one, and the first failure acts alike: fits under way are cancelled, and
// only blocks that are whole by then still reach the sink.
//
// A [Plan] is read-only and may be shared by goroutines; a Sample belongs to
// whoever asked for it, save its case weights, which all draws share, and
// what is left of it, which is its partner.
//
// # Papers
//
// Complementary pairs: Shah and Samworth (2013), Journal of the Royal
// Statistical Society B 75, 55-80. Bootstrap: Efron (1979), Annals of
// Statistics 7, 1-26. Randomised lasso: Meinshausen and Buehlmann (2010),
// Journal of the Royal Statistical Society B 72, 417-473, section 3.1. Digest: SHA-256, FIPS 180-4. Integers below a
// limit: Lemire (2019), ACM Transactions on Modeling and Computer Simulation
// 29(1), article 3. Partial shuffle: Knuth, The Art of Computer Programming,
// volume 2, section 3.4.2, algorithm P. Stream: ChaCha of Bernstein (2008) with 8
// rounds.
package resample
