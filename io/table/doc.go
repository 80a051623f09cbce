// Package table reads tables from files into what a fit needs: a centred,
// column-major matrix of float64, the outcome, and a fingerprint.
//
// # Formats
//
// Parquet (one file, or a folder or glob of files with one schema, in the
// order of their names), Arrow IPC files and streams, and CSV, plain or
// compressed with gzip. What a file holds decides, not its name. Values enter
// as float64: integers of any width, floating point of any width, decimals and
// truth values are numeric; text, dates, binary and nested columns are listed
// with the reason why they cannot be used.
//
// # Words
//
// A candidate may be selected; an always-in column is in every model; a gap is
// a cell without a finite number: missing, NaN or infinite. Rows are counted
// from 0, as they stand in the table, everywhere: in messages, in Data.Rows and
// in what the command rows prints. Lines of a CSV file are counted from 1.
//
// # Steps
//
// [Open] reads the schema. [Source.Scan] describes every numeric column, a few
// columns in memory at a time. [Source.Load] reads the columns asked for, all
// at the same time and row group by row group, into one block of memory; takes
// rows of weight 0 out; applies the policy for gaps ([Refuse], [DropRows],
// [FillMean]); takes the fingerprint; and centres each column in place at its
// mean over the rows used. Sums run over rows in table order and are
// compensated, so that the result does not depend on the number of workers.
//
// # Damaged and hostile files
//
// Every size in a file is a claim. It is held against the size of the file,
// the number of rows and the memory that is free before memory is taken for
// it. Panics of libraries that met damaged bytes become errors. Mistakes that
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
