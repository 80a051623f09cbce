package report

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
	"testing"

	"context"
	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/array"
	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/file"
	"github.com/apache/arrow/go/v17/parquet/pqarrow"

	"holdfast/selection"
)

// promised are the columns of DESIGN 7, "What programs may rely on".
var promised = strings.Split("predictor, frequency, frequency_low, frequency_high, both_halves, positive_share, coef_low, coef_median, coef_high, "+
	"selected_coef_low, selected_coef_median, selected_coef_high, stable", ", ")

// expected is a row in the promised order, and nil where undefined, built
// from the judgement a second time.
func expected(r selection.Row) []any {
	pointer := func(v *float64) any {
		if v == nil {
			return nil
		}
		return *v
	}
	three := func(s *selection.Spread) [3]any {
		if s == nil {
			return [3]any{}
		}
		return [3]any{s.Low, s.Median, s.High}
	}
	coef, selected := three(r.Coef), three(r.Selected)
	return []any{r.Predictor, r.Frequency, r.Low, r.High, pointer(r.BothHalves), pointer(r.PositiveShare), coef[0], coef[1], coef[2],
		selected[0], selected[1], selected[2], r.Stable}
}

func TestCSVParsedBack(t *testing.T) {
	for _, bootstrap := range []bool{false, true} {
		j := judged(t, hatchery(), 100, bootstrap, hatcheryDecision())
		var b bytes.Buffer
		if err := WriteStabilityCSV(&b, j, false); err != nil {
			t.Fatal(err)
		}
		records, err := csv.NewReader(bytes.NewReader(b.Bytes())).ReadAll()
		if err != nil {
			t.Fatal(err)
		}
		if !slices.Equal(records[0][:len(promised)], promised) {
			t.Fatalf("header %v", records[0])
		}
		if len(records) != len(j.Rows)+1 {
			t.Fatalf("%d rows for %d candidates", len(records)-1, len(j.Rows))
		}
		for i, record := range records[1:] {
			for k, want := range expected(j.Rows[i]) {
				if got := record[k]; !sameField(got, want) {
					t.Errorf("row %d, %s: %q for %v", i, promised[k], got, want)
				}
			}
		}
	}
}

// sameField reports whether a CSV field reads back to the value, to the bit.
func sameField(got string, want any) bool {
	switch want := want.(type) {
	case nil:
		return got == ""
	case string:
		return got == want
	case bool:
		return got == map[bool]string{true: "true", false: "false"}[want]
	case float64:
		v, err := strconv.ParseFloat(got, 64)
		return err == nil && math.Float64bits(v) == math.Float64bits(want)
	}
	return false
}

// RFC 4180: a field with a comma, a quote or a line end stands in quotes, and
// quotes in it are doubled.
func TestCSVQuoting(t *testing.T) {
	j := judged(t, []panel{{"algae, \"T-iso\"", 1, 1}, {"two\nlines", 0, 0}}, 2, false,
		selection.Decision{Region: selection.Cap, Bound: selection.WorstCase, Threshold: 1, Selected: 1})
	var b bytes.Buffer
	if err := WriteStabilityCSV(&b, j, false); err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{"\n\"algae, \"\"T-iso\"\"\",1,", "\n\"two\nlines\",0,"} {
		if !strings.Contains(b.String(), want) {
			t.Errorf("%q is not in\n%s", want, b.String())
		}
	}
}

func TestSpreadsheetCopyHoldsNoFormula(t *testing.T) {
	j := judged(t, hatchery(), 100, false, hatcheryDecision())
	var plain, safe bytes.Buffer
	if err := errors.Join(WriteStabilityCSV(&plain, j, false), WriteStabilityCSV(&safe, j, true)); err != nil {
		t.Fatal(err)
	}
	a, err1 := csv.NewReader(&plain).ReadAll()
	b, err2 := csv.NewReader(&safe).ReadAll()
	if err := errors.Join(err1, err2); err != nil {
		t.Fatal(err)
	}
	neutralised := 0
	for i := range a {
		name := b[i][0]
		if strings.ContainsAny(name[:1], "=+-@") {
			t.Errorf("%q is left as it is", name)
		}
		if name != a[i][0] {
			neutralised++
			if name != "'"+a[i][0] {
				t.Errorf("%q became %q", a[i][0], name)
			}
		}
		if !slices.Equal(a[i][1:], b[i][1:]) {
			t.Errorf("row %d: the numbers differ", i)
		}
	}
	if neutralised != 4 {
		t.Errorf("%d names neutralised, not the 4 that begin with = + - @", neutralised)
	}
}

// keys reads the member names of an object in the order in which they stand.
func keys(t *testing.T, text json.RawMessage) []string {
	t.Helper()
	d := json.NewDecoder(bytes.NewReader(text))
	var names []string
	if _, err := d.Token(); err != nil {
		t.Fatal(err)
	}
	for d.More() {
		name, err := d.Token()
		if err != nil {
			t.Fatal(err)
		}
		names = append(names, name.(string))
		var skip json.RawMessage
		if err := d.Decode(&skip); err != nil {
			t.Fatal(err)
		}
	}
	return names
}

func begins(t *testing.T, what string, got []string, want string) {
	t.Helper()
	list := strings.Split(want, " ")
	if len(got) < len(list) || !slices.Equal(got[:len(list)], list) {
		t.Errorf("%s: members %v, not %v first", what, got, list)
	}
}

// The members and their order are those of DESIGN 7.
func TestJSONToTheLetter(t *testing.T) {
	j := judged(t, hatchery(), 100, false, hatcheryDecision())
	record := hatcheryDecision()
	record.Selected = 6
	var b bytes.Buffer
	if err := JSON(&b, j, Info{Outcome: "survival <d21>", Kind: "number", Record: &record, Warnings: []string{"w"}}); err != nil {
		t.Fatal(err)
	}
	if !strings.HasSuffix(b.String(), "}\n") || strings.Count(b.String(), "\n") != 1 || !strings.Contains(b.String(), "survival <d21>") {
		t.Errorf("not one line of plain JSON: %.200s", b.String())
	}
	begins(t, "top", keys(t, b.Bytes()), "outcome kind draws design candidates decision predictors always warnings")
	var top struct {
		Outcome, Kind, Design string
		Draws, Candidates     int
		Decision              json.RawMessage
		Predictors, Always    []json.RawMessage
		Warnings              []string
	}
	if err := json.Unmarshal(b.Bytes(), &top); err != nil {
		t.Fatal(err)
	}
	if top.Outcome != "survival <d21>" || top.Kind != "number" || top.Design != "halves" || top.Draws != 100 || top.Candidates != 41 || len(top.Predictors) != 41 {
		t.Errorf("%+v", top)
	}
	begins(t, "decision", keys(t, top.Decision), "threshold selected false_selections bound need bounds stable")
	var decision struct {
		Threshold       float64
		Selected, Need  int
		FalseSelections float64 `json:"false_selections"`
		Bound           string
		Bounds          json.RawMessage
		Stable          []string
		Explored        bool
	}
	if err := json.Unmarshal(top.Decision, &decision); err != nil {
		t.Fatal(err)
	}
	begins(t, "bounds", keys(t, decision.Bounds), "worst-case unimodal r-concave")
	if decision.Threshold != 0.8 || decision.Selected != 7 || decision.Need != 80 || decision.Bound != "unimodal" ||
		decision.FalseSelections != *j.Bounds.Of(selection.Unimodal).FalseSelections || !slices.Equal(decision.Stable, j.StableNames()) || !decision.Explored {
		t.Errorf("decision %+v", decision)
	}
	for i, text := range top.Predictors {
		begins(t, "predictor", keys(t, text), strings.Join(promised, " "))
		var row map[string]any
		if err := json.Unmarshal(text, &row); err != nil {
			t.Fatal(err)
		}
		for k, want := range expected(j.Rows[i]) {
			if row[promised[k]] != want {
				t.Errorf("predictor %d, %s: %v, not %v", i, promised[k], row[promised[k]], want)
			}
		}
	}
	begins(t, "always", keys(t, top.Always[0]), "predictor class coef_low coef_median coef_high")
	if !strings.HasPrefix(string(top.Always[0]), `{"predictor":"spawn_day","class":null,"coef_low":0.`) {
		t.Errorf("always: %s", top.Always[0])
	}
	if !slices.Equal(top.Warnings, []string{"w"}) {
		t.Errorf("warnings %v", top.Warnings)
	}
}

func TestJSONNulls(t *testing.T) {
	d := hatcheryDecision()
	d.Notes = []string{"a note"}
	draws := hatcheryDraws([]panel{{"ph", 0, 0}}, 4)
	for i := range draws {
		draws[i].Last, draws[i].Always = -1, nil // no certified fit at all
		draws[i].Uncertified, draws[i].Complete = true, false
	}
	d.Selected = 1
	j, err := selection.Judge(draws, true, selection.Predictors{Names: []string{"ph"}, Deviations: []float64{1}, Always: []string{"spawn_day"}, AlwaysDeviations: []float64{1}}, d)
	if err != nil {
		t.Fatal(err)
	}
	var b bytes.Buffer
	if err := JSON(&b, j, Info{}); err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{`"design":"bootstrap"`, `"false_selections":null`, `"stable":[]`, `"both_halves":null`, `"positive_share":null`,
		`"selected_coef_low":null,"selected_coef_median":null,"selected_coef_high":null,"stable":false`,
		`{"predictor":"spawn_day","class":null,"coef_low":null,"coef_median":null,"coef_high":null}`, `"a note"`, `"worst-case":{"false_selections":null,"why":`} {
		if !strings.Contains(b.String(), want) {
			t.Errorf("%s is not in %s", want, b.String())
		}
	}
}

// readTable reads a Parquet file back with the library's own reader.
func readTable(t *testing.T, text []byte) arrow.Table {
	t.Helper()
	pr, err := file.NewParquetReader(bytes.NewReader(text))
	if err != nil {
		t.Fatal(err)
	}
	if root := pr.MetaData().Schema.Root().RepetitionType(); root != parquet.Repetitions.Required {
		t.Errorf("the root of the schema is %s: readers that count it take every column for a list", root)
	}
	r, err := pqarrow.NewFileReader(pr, pqarrow.ArrowReadProperties{}, memory.DefaultAllocator)
	if err != nil {
		t.Fatal(err)
	}
	table, err := r.ReadTable(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	return table
}

// cell returns a value of a table, nil for null.
func cell(table arrow.Table, column, row int) any {
	for _, chunk := range table.Column(column).Data().Chunks() {
		if row >= chunk.Len() {
			row -= chunk.Len()
			continue
		}
		if chunk.IsNull(row) {
			return nil
		}
		switch c := chunk.(type) {
		case *array.String:
			return c.Value(row)
		case *array.Float64:
			return c.Value(row)
		case *array.Boolean:
			return c.Value(row)
		case *array.Int64:
			return c.Value(row)
		}
		return fmt.Sprintf("a column of type %s", chunk.DataType())
	}
	return "no such row"
}

func columnNames(table arrow.Table) []string {
	var names []string
	for _, f := range table.Schema().Fields() {
		names = append(names, f.Name)
	}
	return names
}

func TestStabilityParquetReadBack(t *testing.T) {
	for _, bootstrap := range []bool{false, true} {
		j := judged(t, hatchery(), 100, bootstrap, hatcheryDecision())
		var b, again bytes.Buffer
		if err := errors.Join(WriteStabilityParquet(&b, j), WriteStabilityParquet(&again, j)); err != nil {
			t.Fatal(err)
		}
		if !bytes.Equal(b.Bytes(), again.Bytes()) {
			t.Error("two writes differ")
		}
		table := readTable(t, b.Bytes())
		if !slices.Equal(columnNames(table)[:len(promised)], promised) || table.NumRows() != int64(len(j.Rows)) {
			t.Fatalf("%v, %d rows", columnNames(table), table.NumRows())
		}
		for i := range j.Rows {
			for k, want := range expected(j.Rows[i]) {
				if got := cell(table, k, i); got != want {
					t.Errorf("row %d, %s: %v, not %v", i, promised[k], got, want)
				}
			}
		}
	}
}

// More rows than one batch holds.
func TestLongTable(t *testing.T) {
	list := make([]panel, batch+1000)
	for i := range list {
		list[i].name = fmt.Sprintf("asv_%06d", i)
	}
	p := selection.Predictors{Names: make([]string, len(list)), Deviations: make([]float64, len(list))}
	for i := range list {
		p.Names[i] = list[i].name
	}
	j, err := selection.Judge([]selection.Draw{{Number: 0, Complete: true}, {Number: 1, Complete: true}}, false, p, hatcheryDecision())
	if err != nil {
		t.Fatal(err)
	}
	var b bytes.Buffer
	if err := WriteStabilityParquet(&b, j); err != nil {
		t.Fatal(err)
	}
	table := readTable(t, b.Bytes())
	if table.NumRows() != int64(len(list)) || cell(table, 0, batch) != list[batch].name || cell(table, 0, len(list)-1) != list[len(list)-1].name {
		t.Errorf("%d rows, row %d is %v", table.NumRows(), batch, cell(table, 0, batch))
	}
}

func TestPathsReadBack(t *testing.T) {
	j := judged(t, hatchery(), 20, false, hatcheryDecision())
	lambda := func(step int) float64 { return 0.3 * math.Pow(0.95, float64(step)) }
	var b bytes.Buffer
	if err := WritePaths(&b, j, lambda); err != nil {
		t.Fatal(err)
	}
	table := readTable(t, b.Bytes())
	if got := strings.Join(columnNames(table), ", "); got != "step, lambda, predictor, frequency, draws_reached" {
		t.Fatal(got)
	}
	i := 0
	for row := range j.Paths() {
		for k, want := range []any{int64(row.Step), lambda(row.Step), row.Predictor, row.Frequency, int64(row.DrawsReached)} {
			if got := cell(table, k, i); got != want {
				t.Errorf("row %d, column %d: %v, not %v", i, k, got, want)
			}
		}
		i++
	}
	if table.NumRows() != int64(i) || i == 0 {
		t.Errorf("%d rows, not %d", table.NumRows(), i)
	}
}

// A disk that is full after any number of bytes is noticed by every writer.
func TestFullDiskIsNoticed(t *testing.T) {
	j := judged(t, hatchery(), 20, false, hatcheryDecision())
	for name, write := range map[string]func(*full) error{
		"csv":     func(w *full) error { return WriteStabilityCSV(w, j, false) },
		"json":    func(w *full) error { return JSON(w, j, Info{}) },
		"text":    func(w *full) error { return Text(w, j, Info{}, 80, true) },
		"parquet": func(w *full) error { return WriteStabilityParquet(w, j) },
		"paths":   func(w *full) error { return WritePaths(w, j, func(int) float64 { return 1 }) },
		"terms":   func(w *full) error { return WriteTerms(w, j) },
	} {
		whole := &full{left: math.MaxInt}
		if err := write(whole); err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		size := math.MaxInt - whole.left
		for n := 0; n < size; n += 1 + size/50 {
			if err := write(&full{left: n}); !errors.Is(err, errFull) {
				t.Fatalf("%s: full after %d of %d bytes, and the error is %v", name, n, size, err)
			}
		}
		if err := write(&full{left: size - 1}); !errors.Is(err, errFull) {
			t.Fatalf("%s: the last byte is missing, and the error is %v", name, err)
		}
	}
}

var errFull = errors.New("the disk is full")

type full struct{ left int }

func (f *full) Write(b []byte) (int, error) {
	if len(b) > f.left {
		n := f.left
		f.left = 0
		return n, errFull
	}
	f.left -= len(b)
	return len(b), nil
}
