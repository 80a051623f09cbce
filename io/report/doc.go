// Package report writes a judgement down: the stability table as CSV and
// Parquet, the stability paths, the terms, JSON for programs, and a page of
// text for people.
//
// # Vocabulary
//
// The columns of the stability table are defined once, in columns.go, and are
// the same in CSV, Parquet and JSON; the order is a promise to programs, and
// new columns come after "stable". So are those of the terms.
//
// A coefficient stands in the stability table where the predictor has one, and
// among the terms where it has several (groups, categories, outcomes of
// classes), never in both. Terms stand in the order of the stability table,
// chosen or not. What is undefined is empty in CSV and null
// elsewhere. Numbers for programs have full precision: the shortest text that
// reads back to the same bits. Numbers in the text are rounded; a bound is
// rounded up.
//
// A note is a numbered footnote under the text. Warnings travel as values with
// the judgement and end as notes, or in the "warnings" of the JSON.
//
// # Safety
//
// Column names are data. The text escapes what a terminal could obey (control
// characters, marks that turn the writing direction), and cuts long names by
// the width they take. The CSV quotes as RFC 4180 says and ends lines with a
// single newline; [Spreadsheet] also neutralises names that a spreadsheet
// would take for a formula.
//
// Functions write to an io.Writer and keep nothing. They may be used by
// several goroutines at once, on one judgement too. Equal judgements give
// equal bytes.
package report
