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
//   - A block is the draws that one worker fits together; both halves of a pair
//     are in the same one.
//   - A part is a share of the draws: pair k (bootstrap: draw k) is in part
//     k mod N.
//
// # Sameness
//
// Every pair (every bootstrap draw) has a generator of its own, keyed by its
// design, the seed and its number. So any draw can be made anywhere and in
// any order, and neither the number of draws nor the number of workers can
// change it. The stream is ChaCha8 as math/rand/v2 has it, whose output is
// part of a written specification; the integers below a limit and the
// shuffle are written here, so that a later library cannot change a draw. A
// test pins the first draws.
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
// whoever asked for it, save its case weights, which all draws share.
//
// # Papers
//
// Complementary pairs: Shah and Samworth (2013), Journal of the Royal
// Statistical Society B 75, 55-80. Bootstrap: Efron (1979), Annals of
// Statistics 7, 1-26. Integers below a limit: Lemire (2019), ACM
// Transactions on Modeling and Computer Simulation 29(1), article 3. Partial
// shuffle: Knuth, The Art of Computer Programming, volume 2, section 3.4.2,
// algorithm P. Stream: ChaCha of Bernstein (2008) with 8 rounds.
package resample
