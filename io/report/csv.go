package report

import (
	"encoding/csv"
	"io"
	"strconv"
	"strings"

	"holdfast/selection"
)

// WriteStabilityCSV writes the stability table as CSV, every candidate a row.
// With spreadsheet, names that a spreadsheet would take for a formula get a
// leading apostrophe; see [Spreadsheet].
func WriteStabilityCSV(w io.Writer, j *selection.Judgement, spreadsheet bool) error {
	out := csv.NewWriter(w)
	fields := make([]string, len(stabilityColumns))
	for i, c := range stabilityColumns {
		fields[i] = c.name
	}
	if err := out.Write(fields); err != nil {
		return err
	}
	for r := range j.Rows {
		for i, c := range stabilityColumns {
			fields[i] = field(c.value(&j.Rows[r]), spreadsheet)
		}
		if err := out.Write(fields); err != nil {
			return err
		}
	}
	out.Flush()
	return out.Error()
}

// field writes a value as a CSV field.
func field(v any, spreadsheet bool) string {
	switch v := v.(type) {
	case string:
		if spreadsheet {
			return Spreadsheet(v)
		}
		return v
	case float64:
		return strconv.FormatFloat(v, 'g', -1, 64)
	case bool:
		return strconv.FormatBool(v)
	case int64:
		return strconv.FormatInt(v, 10)
	}
	return ""
}

// Spreadsheet returns the text with a leading apostrophe where a spreadsheet
// would read it as a formula or a command: where it begins with = + - @, their
// full-width forms, or a tab or line end that hides one. Numbers of the table
// are not text and stay as they are.
func Spreadsheet(text string) string {
	if strings.IndexAny(text, "=+-@＝＋－＠\t\r\n") == 0 {
		return "'" + text
	}
	return text
}
