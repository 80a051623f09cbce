// Package study reads and writes the study file: a TOML text that says what is
// asked of a table. It knows column names, not values, and opens no table.
//
// # Vocabulary
//
//   - study: table, outcome, candidates, penalty, draws and decision, with
//     every default filled in.
//   - key: one line of the file, section.name; --set gives one from the
//     command line.
//   - name and pattern: the two ways to speak of columns. A text that a column
//     has as its name is that column, whatever characters it holds; any other
//     text with * ? [ or \ is a pattern.
//   - roles: which columns are outcome, candidates and always in the model.
//   - predictor: one unit of selection that candidates make: a column, a
//     category (a column read by its levels, as text always is) or a group of
//     columns. Penalties, budget and frequencies are per predictor.
//   - kind: what the outcome is: number, yes-no, count, classes or survival.
//   - draft: a study proposed from the shape of a table and the values of the
//     outcome.
//
// # Steps
//
// Read or Parse checks the text and every value, and reports all problems at
// once with their lines. CheckReady refuses what this version does not do.
// Resolve turns names and patterns into columns. Settle ties the decision to
// the number of candidates. Marshal writes the study down for the record.
// Draft goes the other way: from facts about a table to a study.
//
// # The decision
//
// Of threshold, selected and false_selections two fix the third. A file gives
// at most two and is filled up to two. One number given by --set replaces as
// `judge` replaces: a threshold keeps selected, the others keep the threshold.
// Where what is kept follows from the candidates, the replaced number waits in
// Decision.Replace until Settle.
//
// # Sharing
//
// No function changes its arguments. A Study may be read by several goroutines
// at once. Copies that functions here return share lists and maps with the
// original.
package study
