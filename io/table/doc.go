// Package table reads tables from files into what a fit needs: a centred,
// column-major matrix of float64, the outcome, and a fingerprint.
//
// # Formats
//
// Parquet (one file, or a folder or glob of files with one schema, in the
// order of their names), Arrow IPC files and streams, and CSV, plain or
// compressed with gzip. What a file holds decides, not its name. Numbers enter
// as float64: integers of any width, floating point of any width, decimals and
// truth values. Text enters by its levels, the different values that it has;
// blanks around a text do not count, and an empty text is a missing cell. Dates,
// binary and nested columns are listed with the reason why they cannot be used.
//
// # Words
//
// A candidate may be selected; an always-in column is in every model. A
// category is one of them that is read by its levels: text always, truth values
// and whole numbers where the request says so. It stands in X as an indicator
// column, 0 or 1, for every level but its reference. A gap is a cell without a
// finite number or level: missing, NaN or infinite. Rows are counted
// from 0, as they stand in the table, everywhere: in messages, in Data.Rows and
// in what the command rows prints. Lines of a CSV file are counted from 1.
//
// # Steps
//
// [Open] reads the schema. [Source.Scan] describes every column of numbers or
// text, a few columns in memory at a time. [Source.Load] reads the columns asked
// for, all at the same time and row group by row group, numbers into one block of
// memory and text into codes; takes rows of weight 0 out, and under [DropRows]
// those without outcome, weight, offset, exposure or stratum; leaves out categories
// with too many levels; checks the outcome; applies the policy for gaps
// ([Refuse], [DropRows], [FillMean]); finds outcome, offset and strata of the
// rows used; takes the fingerprint; makes the indicators, and centres each column
// in place at its mean over the rows used. Sums run over rows in table order and
// are compensated, levels are put in order, so that the result does not depend on
// the number of workers.
//
// # Outcomes
//
// [Measure] says how the outcome is read: numbers, yes-no (two values of which
// one is the success), counts, classes, or survival (a time, an event status, and
// perhaps an entry and strata). The outcome and what belongs to it are never
// filled: a missing cell is an error that names its row, as is a value that the
// kind cannot have.
//
// # Damaged and hostile files
//
// Every size in a file is a claim. It is held against the size of the file,
// the number of rows and the memory that is free before memory is taken for
// it. Of text no more levels are collected than can be used, and only the
// begin of a text that is too long to be one is kept. Panics of libraries that
// met damaged bytes become errors. Mistakes that
// the user can put right are of type [*Error].
//
// # Ownership
//
// A [Source] holds no open file and may be shared between goroutines. A [Data]
// belongs to the caller.
//
// # Sources
//
// Parquet and its Thrift definition (Apache Parquet format 2.10); Arrow
// columnar and IPC format 1.5; RFC 4180 for CSV. Compensated sums: Knuth, The
// Art of Computer Programming, vol. 2, 4.2.2. Two-pass deviation: Chan, Golub &
// LeVeque, The American Statistician 37 (1983). AUC: Hanley & McNeil, Radiology
// 143 (1982).
package table
