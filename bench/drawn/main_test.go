package main

import (
	"bytes"
	"os"
	"path/filepath"
	"testing"

	"holdfast/resample"
)

// TestStoredRows holds the rows that other programs were given to what a run
// with the same seed draws: otherwise the counts would be those of another
// run.
func TestStoredRows(t *testing.T) {
	for name, plan := range map[string]resample.Plan{
		"diabetes":      {Rows: 442, Number: 100, Seed: 11},
		"gasoline":      {Rows: 60, Number: 100, Seed: 12},
		"insurance":     {Rows: 64, Number: 100, Seed: 15},
		"breast_cancer": balanced(t, "breast_cancer", "malignant", 13),
		"wine":          balanced(t, "wine", "cultivar", 14),
		"veteran":       balanced(t, "veteran", "status", 17),
	} {
		want, err := os.ReadFile(filepath.Join("..", "..", "testdata", "frequencies", name+"_rows.csv"))
		if err != nil {
			t.Fatal(err)
		}
		var got bytes.Buffer
		if err := write(&got, plan); err != nil {
			t.Fatal(err)
		}
		if !bytes.Equal(got.Bytes(), want) {
			t.Errorf("%s: the plan's rows are not those of the file", name)
		}
	}
}

// balanced is a plan of halves balanced by a column of a table.
func balanced(t *testing.T, table, column string, seed uint64) resample.Plan {
	t.Helper()
	codes, err := strata(filepath.Join("..", "..", "testdata", "data", table+".csv"), column)
	if err != nil {
		t.Fatal(err)
	}
	return resample.Plan{Rows: len(codes), Number: 100, Seed: seed, Within: codes}
}

func TestImpossiblePlan(t *testing.T) {
	if err := write(&bytes.Buffer{}, resample.Plan{Rows: 3, Number: 100, Seed: 1}); err == nil {
		t.Error("three rows were drawn from")
	}
}

func TestUnknownColumn(t *testing.T) {
	if _, err := strata(filepath.Join("..", "..", "testdata", "data", "breast_cancer.csv"), "benign"); err == nil {
		t.Error("a column that is not there was read")
	}
}
