// Package deal writes batch scripts for Slurm, submits them, and knows which
// parts of a run are in work.
//
// # Vocabulary
//
//   - A part is the share of a run's draws that one task makes; parts are
//     numbered from 0.
//   - A task is one element of a job array; its index is the number of its part.
//   - The judging job reads what the parts have left and writes the tables.
//   - Staging copies the table to a disk of the node, once for all tasks there.
//
// # What a script does
//
// Two minutes before the time limit the batch shell gets USR1. It stops the
// program with TERM, which writes what is whole and exits with 143, and asks for
// its own requeue; a program that needs longer is told once more and leaves at once.
// The number of such restarts is capped. Every other exit code of the program is
// the task's, so that the accounting shows it. The judging job waits for the end
// of all tasks, whatever their exit codes: exit 3 of one is a result.
//
// # Never twice
//
// A task is known by the path of its script, which the scheduler reports, and
// the script stands in the run directory. So a submission whose number could not
// be kept is found all the same. A lock keeps two submissions from crossing.
package deal
