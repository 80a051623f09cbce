// Package rundir is the run directory: everything that a run leaves on disk,
// so that a judgement never fits again.
//
// # What is in it
//
//	run.json        identity, lattice, parts, decision of record, log of
//	                judgements and of extensions
//	study.toml      the study with every default written out
//	draws/          finished draws, one Parquet file per block
//	parts/I.json    state, host, timings and worst certificate of part I
//	parts/I.lock    who makes part I now
//	logs/part-I.log what part I said, appended over restarts
//
// and beside them whatever tables the caller writes with [Dir.Write]. A name
// that ends in .damaged is a block that was set aside, one that begins with
// .unfinished- a file that was being written when its process was killed, and
// run.lock is there while run.json is changed; no reader looks at them.
//
// # Vocabulary
//
// The identity of a run is what decides the bits of its draws: the table's
// fingerprint, the outcome in the words of its kind, the candidates with the
// design columns of groups and categories, the penalty, and the draws without
// their number. What follows from the decision and decides bits all the same
// (where paths stop, what a group pays for its size) is held as it was when the
// directory was made, for the decision may change. The identity's digest stands in run.json and in every block, so
// a block of another run is found out. A block is the draws that one worker
// fitted together. The decision of record is the decision that was written
// before draw 0; every other one is logged.
//
// # A block file
//
// draws/block-NNNNNN.parquet, NNNNNN the first draw in it, holds one row per
// draw, in the order of draw numbers. A second block that begins with the same
// draw is called block-NNNNNN-DDDDDDDDDDDDDDDD.parquet after its digest: a file
// that is there is never replaced.
//
//	draw, first, last        int32   draw number; first and last certified lattice step
//	stop, why                text    floor | stop_after | not certified; what failed
//	violation, gap           double  worst certificate over the steps
//	borderline, twins        int32   steps with a candidate on the border; entries that share a fit
//	redraws                  int32   how often it was made anew because it could not be fitted
//	entries                  list of (step, predictor int32; negative boolean)
//	coefficients             list of (step, predictor, term, class int32; coefficient double), non-zero
//	intercepts               list of double, step by step, one for each class; none for survival
//	always                   list of double, step by step, column by column, one for each class
//	null_deviance            double  of the rows left out, for the model of the intercept alone
//	deviance                 list of double, of the rows left out, one per step, or none
//	still                    list of int32, predictors that did not vary in the draw
//
// A predictor is its position among the candidates of run.json, from 0; a term
// is a design column of a group or category, by its position there; a class is
// a level of the outcome. Term is there only where a candidate of the run has
// several, class only where the outcome has classes, so that a run of single
// columns does not pay for them. A sign (negative) has only a predictor with
// one coefficient. The always-in columns stand in run.json's order, a category's
// one by one.
//
// Coefficients are in the column's own units. Values are plain and nothing is
// compressed (16 bytes a coefficient, and 4 for term and for class): the bytes
// follow from the draws alone, and a file cannot claim more memory than its own
// length.
//
// Two SHA-256 digests stand in the file's key-value metadata. "holdfast.file"
// is over all bytes of the file, its own 64 digits taken as zeros, and is
// checked before a page is decoded: no bit of a block can change unnoticed.
// "holdfast.draws" is over a canonical encoding of the decoded draws (see
// digest.go) and is checked after it, so the numbers that are judged are the
// numbers that were fitted, whatever wrote the file.
//
// # Safety
//
// A file appears whole or not at all: a unique temporary name in the same
// folder, write, sync, close, rename or link, sync of the folder. A failed sync
// is an error and is not tried again. The mode is 0644 less the umask. A Dir
// may be used by several goroutines at once. A directory can be opened and read
// where it cannot be written. A disk that is full, or gone, is told in words
// ([ErrFull], [ErrQuota], [ErrReadOnly], [ErrGone]); what was put before stays.
//
// # Going on
//
// Whoever wants to go on with a run opens it, lets [Dir.Compare] refuse what
// does not belong to it, may [Dir.Extend] it, and makes the draws that
// [Dir.Survey] finds missing, after [Dir.SetAside] has moved damaged blocks out
// of the way. Draws depend on their numbers alone, so it does not matter who
// made which, when, or twice. [Dir.Lock] only keeps two processes from doing
// the same work. Directories into which parts were written apart are read as
// one run by [OpenTogether].
package rundir
