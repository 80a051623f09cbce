package main

import (
	"bytes"
	"os"
	"path/filepath"
	"testing"
)

// TestStoredRows holds the rows that scikit-learn was given to what a run
// with the same seed draws: otherwise the counts would be those of another
// run.
func TestStoredRows(t *testing.T) {
	for _, c := range []struct {
		name string
		rows int
		seed uint64
	}{{"diabetes", 442, 11}, {"gasoline", 60, 12}} {
		want, err := os.ReadFile(filepath.Join("..", "..", "testdata", "frequencies", c.name+"_rows.csv"))
		if err != nil {
			t.Fatal(err)
		}
		var got bytes.Buffer
		if err := write(&got, c.rows, 100, c.seed); err != nil {
			t.Fatal(err)
		}
		if !bytes.Equal(got.Bytes(), want) {
			t.Errorf("%s: the plan's rows are not those of the file", c.name)
		}
	}
}

func TestImpossiblePlan(t *testing.T) {
	if err := write(&bytes.Buffer{}, 3, 100, 1); err == nil {
		t.Error("three rows were drawn from")
	}
}
