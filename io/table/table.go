package table

import (
	"context"
	"errors"
	"io"
	"os"
	"path/filepath"
	"runtime"
	"sort"
	"strconv"
	"strings"
	"unicode/utf8"
)

// Kind is what a column holds, as far as a fit needs to know.
type Kind uint8

const (
	Number  Kind = iota // floating point of any width, decimals
	Integer             // integers of any width, signed or not
	Boolean             // false and true, read as 0 and 1
	Text                // text, or a dictionary of text: read by its levels
	Date                // dates, times, timestamps, durations
	Binary              // bytes without a meaning known here
	Nested              // lists, structs, maps, unions
	Empty               // a column that holds no value at all
)

// String returns the word shown to people.
func (k Kind) String() string {
	names := [...]string{"number", "integer", "boolean", "text", "date", "binary", "nested", "empty"}
	if int(k) < len(names) {
		return names[k]
	}
	return "unknown"
}

// Numeric reports whether values of this kind are read as numbers.
func (k Kind) Numeric() bool { return k <= Boolean }

// Column is one column of a table.
type Column struct {
	Name   string
	Type   string // type in the words of the file format, for people
	Kind   Kind
	Usable bool   // its values are numbers
	Reason string // why not, if it is not usable
}

// levelled reports whether a column can be read by its levels.
func (c Column) levelled() bool { return c.Usable || c.Kind == Text }

// format is an opened table in one of the file formats.
type format interface {
	columns() []Column
	rows() int64
	// fill reads columns into their sinks. It returns, sink by sink, the
	// integers that were rounded.
	fill(ctx context.Context, sinks []sink, workers int) ([]rounded, error)
	// rowwise reports that every call of fill reads the whole file, so that
	// many columns should be asked for at once.
	rowwise() bool
}

// sink is a column to be read, and where its rows() cells go: numbers into
// values, missing cells as the value missing; text into codes of texts.
type sink struct {
	col    int // position among the columns
	values []float64
	texts  *texts // of columns of text alone
}

// Source is an opened table: its columns and number of rows are known, its
// values are not in memory. It holds no open file. A Source may be used by
// several goroutines at once.
type Source struct {
	path   string
	format format
	stamps []stamp
}

// stamp is what a file looked like when it was opened.
type stamp struct {
	path string
	size int64
	time int64
}

// Open reads the schema of a table. path is a file (.parquet, .arrow, .feather,
// .csv, .csv.gz; what it holds decides, not its name), a folder of Parquet
// files, or a glob of Parquet files; several files are one table, in the order
// of their names. A CSV file is read once whole, because only its cells say
// what its columns are. Whatever is wrong with the table is an *Error.
func Open(path string) (*Source, error) {
	s := &Source{path: path}
	files, many, err := findFiles(path)
	if err != nil {
		return nil, err
	}
	for _, f := range files {
		st, err := takeStamp(f)
		if err != nil {
			return nil, err
		}
		s.stamps = append(s.stamps, st)
	}
	if s.format, err = openFormat(path, files, many); err != nil {
		return nil, err
	}
	if err := checkColumns(path, s.format.columns()); err != nil {
		return nil, err
	}
	return s, nil
}

// Path returns the path that the source was opened with.
func (s *Source) Path() string { return s.path }

// Columns returns the columns in table order. The slice is the caller's.
func (s *Source) Columns() []Column { return append([]Column(nil), s.format.columns()...) }

// Rows returns the number of rows; known is false where only reading all
// values would tell.
func (s *Source) Rows() (n int64, known bool) { return s.format.rows(), true }

// unchanged compares the files with what they were when they were opened.
func (s *Source) unchanged() error {
	for _, was := range s.stamps {
		now, err := takeStamp(was.path)
		if err != nil {
			return err
		}
		if now != was {
			return faultf(was.path, "the file has changed since it was opened: start again")
		}
	}
	return nil
}

func takeStamp(path string) (stamp, error) {
	info, err := os.Stat(path)
	if err != nil {
		return stamp{}, openFault(path, err)
	}
	return stamp{path: path, size: info.Size(), time: info.ModTime().UnixNano()}, nil
}

// findFiles returns the files of a table in the order of their names; many
// says that path is a folder or a glob.
func findFiles(path string) (files []string, many bool, err error) {
	info, err := os.Stat(path)
	switch {
	case err == nil && info.IsDir():
		files, err = parquetFiles(path)
		return files, true, err
	case err == nil && !info.Mode().IsRegular():
		return nil, false, faultf(path, "is not a regular file: write the table to a file first")
	case err == nil:
		return []string{path}, false, nil
	case !errors.Is(err, os.ErrNotExist) || !strings.ContainsAny(path, "*?["):
		return nil, false, openFault(path, err)
	}
	files, err = filepath.Glob(path)
	if err != nil {
		return nil, false, faultf(path, "is neither a file nor a glob that can be understood: %v", err)
	}
	if len(files) == 0 {
		return nil, false, faultf(path, "no file matches this glob")
	}
	sort.Strings(files)
	return files, true, nil
}

// parquetFiles lists the Parquet files of a folder by name; hidden files and
// those that begin with an underscore are the business of other programs.
func parquetFiles(dir string) ([]string, error) {
	entries, err := os.ReadDir(dir)
	if err != nil {
		return nil, openFault(dir, err)
	}
	var files []string
	for _, e := range entries {
		name := e.Name()
		if !e.IsDir() && name[0] != '.' && name[0] != '_' && strings.HasSuffix(strings.ToLower(name), ".parquet") {
			files = append(files, filepath.Join(dir, name))
		}
	}
	if len(files) == 0 {
		return nil, faultf(dir, "the folder holds no .parquet file")
	}
	return files, nil
}

// openFormat opens a table by what its files hold.
func openFormat(path string, files []string, many bool) (format, error) {
	if many {
		return openParquet(files)
	}
	head, err := fileHead(path)
	if err != nil {
		return nil, err
	}
	switch magic := string(head); {
	case len(head) == 0:
		return nil, faultf(path, "the file is empty")
	case strings.HasPrefix(magic, "PAR1"):
		return openParquet(files)
	case strings.HasPrefix(magic, "PARE"):
		return nil, faultf(path, "the Parquet file is encrypted: write a copy that is not")
	case strings.HasPrefix(magic, "ARROW1"), strings.HasPrefix(magic, "\xff\xff\xff\xff"):
		return openArrow(path)
	case strings.HasPrefix(magic, "FEA1"):
		return nil, faultf(path, "this is version 1 of the Feather format, which is not read: write it again as version 2 (Arrow IPC)")
	}
	switch strings.ToLower(filepath.Ext(path)) {
	case ".parquet":
		return nil, faultf(path, "this is not a Parquet file: it does not begin with PAR1")
	case ".arrow", ".feather", ".arrows", ".ipc":
		if oldStream(head) {
			return openArrow(path)
		}
		return nil, faultf(path, "this is not an Arrow file: it begins neither as an IPC file nor as an IPC stream")
	case ".csv", ".gz", ".tsv", ".txt":
		return openCSV(path)
	}
	return nil, faultf(path, "unknown kind of file: .parquet, .arrow, .feather, .csv, .csv.gz, or a folder or glob of Parquet files are read")
}

// fileHead returns the first bytes of a file.
func fileHead(path string) ([]byte, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, openFault(path, err)
	}
	defer f.Close()
	head := make([]byte, 8)
	n, err := io.ReadFull(f, head)
	if err != nil && err != io.EOF && err != io.ErrUnexpectedEOF {
		return nil, openFault(path, err)
	}
	return head[:n], nil
}

// checkColumns refuses tables without columns, names that occur twice and
// names that no study and no result can hold.
func checkColumns(path string, cols []Column) error {
	if len(cols) == 0 {
		return faultf(path, "the table has no columns")
	}
	at := make(map[string]int, len(cols))
	for i, c := range cols {
		if !utf8.ValidString(c.Name) {
			return faultf(path, "the name of column %d, %s, is not UTF-8: write the table again with another name", i+1, quote(c.Name))
		}
		if j, twice := at[c.Name]; twice {
			return faultf(path, "two columns are called %s (columns %d and %d): rename one", quote(c.Name), j+1, i+1)
		}
		at[c.Name] = i
	}
	return nil
}

// workersOr returns the number of workers asked for, or one per processor.
func workersOr(n int) int {
	if n > 0 {
		return n
	}
	return runtime.GOMAXPROCS(0)
}

// isCancel reports whether err is the end of a context.
func isCancel(err error) bool {
	return errors.Is(err, context.Canceled) || errors.Is(err, context.DeadlineExceeded)
}

// grouped writes a count with commas between thousands.
func grouped(n int64) string {
	s := strconv.FormatInt(n, 10)
	for i := len(s) - 3; i > 0 && s[i-1] != '-'; i -= 3 {
		s = s[:i] + "," + s[i:]
	}
	return s
}
