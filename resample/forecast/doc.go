// Package forecast times a few draws and says what all of them will take.
//
// # Vocabulary
//
//   - A round is one block of draws for each of several workers, fitted at the
//     same time, as in a run.
//   - Busy is the time that the workers of a round spent fitting, summed; per
//     draw it does not depend on which worker was last.
//   - Processor time is what the operating system charged for a round. Where it
//     is well below busy, other work took the processors, and the forecast says so.
//   - Fixed is what every machine pays once: reading and checking the table.
//
// # Steps
//
// Time fits the first pair alone, which tells whether more can be afforded, then
// rounds with one worker and with all of them. For other numbers of workers the
// processor time of a draw is taken as a line through the two that were timed:
// workers share the path to memory, so a draw costs more the more of them there are.
//
// Parts recommends few fat parts: each reads the table, which pays only where the
// draws of a part take much longer.
package forecast
