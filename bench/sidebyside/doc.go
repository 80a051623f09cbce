// Command sidebyside times our engine beside the obvious loop with
// scikit-learn over the same half-samples and lambdas, in one session:
//
//	go run ./bench/sidebyside -python /usr/bin/python3 > bench/out/results.md
//
// For each case (a table of bench/shape and a floor) it makes the table once,
// checks that both sides select the same predictors, takes a CPU profile of
// our side, and then runs, round by round and each in a process of its own:
// engine with one worker, loop with one process, engine with two workers,
// loop with two processes. Reading the table counts on neither side. The loop
// makes fewer draws, because each takes it seconds. Kinds of outcome for which
// there is no loop are timed alone.
//
// Medians come with the interval between order statistics that covers the
// median with at least 95 % (binomial), p values are the exact two-sided
// Mann-Whitney test. Summary tables go to standard output, every single run
// to runs.jsonl in the output folder.
package main
