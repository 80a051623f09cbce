package rundir

import (
	"bytes"
	"context"
	"encoding/json"
	"testing"

	"github.com/apache/arrow/go/v17/arrow/array"
	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/apache/arrow/go/v17/parquet/file"
	"github.com/apache/arrow/go/v17/parquet/pqarrow"

	"holdfast/solver"
)

// A block is an ordinary Parquet file: the Arrow library's table reader, which
// shares no code with ours, sees one row per draw with the lists in it.
func TestBlockIsReadByTheLibrary(t *testing.T) {
	run := hatcheryRun(t, 4).Run()
	checkLibrary(t, encoded(t, run, numberedFrom(2, []solver.Path{
		{First: 0, Last: 1, Stop: solver.StopEntered, Violation: 0.25, Gap: 0.5, Borderline: 1, Twins: 2, Redraws: 3,
			Entries:    []solver.Entry{{Candidate: 3, Step: 0, Negative: true}, {Candidate: 1, Step: 1}},
			Coefs:      []solver.Coef{{Step: 0, Candidate: 3, Value: -0.25}, {Step: 1, Candidate: 1, Value: 1.5}},
			Intercepts: []float64{3, 3.5}, Always: []float64{1, 2, 3, 4}, Still: []int32{0, 5}, Deviance: []float64{8, 4}, NullDeviance: 16},
		{First: 1, Last: 0, Stop: solver.StopUncertified, Why: "constant outcome"},
	})), `[{"always":[1,2,3,4],"borderline":1,"coefficients":[{"coefficient":-0.25,"predictor":3,"step":0},{"coefficient":1.5,"predictor":1,"step":1}],`+
		`"deviance":[8,4],"draw":2,"entries":[{"negative":true,"predictor":3,"step":0},{"negative":false,"predictor":1,"step":1}],"first":0,"gap":0.5,`+
		`"intercepts":[3,3.5],"last":1,"null_deviance":16,"redraws":3,"still":[0,5],"stop":"stop_after","twins":2,"violation":0.25,"why":""},`+
		`{"always":[],"borderline":0,"coefficients":[],"deviance":[],"draw":3,"entries":[],"first":1,"gap":0,"intercepts":[],"last":0,"null_deviance":0,"redraws":0,"still":[],`+
		`"stop":"not certified","twins":0,"violation":0,"why":"constant outcome"}]`)
}

// Groups add the term, and classes the class, to each coefficient.
func TestTermsAndClassesAreReadByTheLibrary(t *testing.T) {
	for kind, want := range map[string]string{
		"yes-no":                    `{"coefficient":1.5,"predictor":1,"step":0,"term":1}`,
		"classes":                   `{"class":2,"coefficient":1.5,"predictor":1,"step":0,"term":1}`,
		"classes of single columns": `{"class":1,"coefficient":1.5,"predictor":1,"step":0}`,
	} {
		id, f := kinds()[kind], forms[kind]
		run := Run{Digest: id.Digest(), Identity: id}
		c := solver.Coef{Candidate: 1, Term: f.terms[1] - 1, Class: int32(f.classes) - 1, Value: 1.5}
		checkLibrary(t, encoded(t, run, numberedFrom(0, []solver.Path{{Coefs: []solver.Coef{c}}})),
			`[{"always":[],"borderline":0,"coefficients":[`+want+`],"deviance":[],"draw":0,"entries":[],"first":0,"gap":0,"intercepts":[],"last":0,`+
				`"null_deviance":0,"redraws":0,"still":[],"stop":"floor","twins":0,"violation":0,"why":""}]`)
	}
}

// checkLibrary compares what the library reads with what was written.
func checkLibrary(t *testing.T, text []byte, want string) {
	t.Helper()
	pr, err := file.NewParquetReader(bytes.NewReader(text))
	if err != nil {
		t.Fatal(err)
	}
	r, err := pqarrow.NewFileReader(pr, pqarrow.ArrowReadProperties{}, memory.DefaultAllocator)
	if err != nil {
		t.Fatal(err)
	}
	table, err := r.ReadTable(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	rows := array.NewTableReader(table, 0)
	rows.Next()
	got, err := json.Marshal(rows.Record())
	if err != nil {
		t.Fatal(err)
	}
	if !sameJSON(t, got, []byte(want)) {
		t.Errorf("the library reads\n%s\nnot\n%s", got, want)
	}
}

func sameJSON(t *testing.T, a, b []byte) bool {
	t.Helper()
	var x, y any
	if err := json.Unmarshal(a, &x); err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(b, &y); err != nil {
		t.Fatal(err)
	}
	p, _ := json.Marshal(x)
	q, _ := json.Marshal(y)
	return bytes.Equal(p, q)
}
