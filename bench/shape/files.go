package shape

import (
	"fmt"
	"os"
	"path/filepath"

	"holdfast/solver"
)

// Files are the paths of a shape's table in a folder.
type Files struct {
	Columns string // candidates
	Outcome string // one column, for Cox two: time and event
	Draws   string // rows of every draw
}

// In returns the paths that a shape has in a folder.
func (s Shape) In(dir string) Files {
	return Files{
		Columns: filepath.Join(dir, s.Name+"_x.npy"),
		Outcome: filepath.Join(dir, s.Name+"_y.npy"),
		Draws:   filepath.Join(dir, s.Name+"_rows.npy"),
	}
}

// Keep makes the table and writes columns and outcome, unless both are there.
func (s Shape) Keep(dir string, seed uint64) error {
	files := s.In(dir)
	if exists(files.Columns) && exists(files.Outcome) {
		return nil
	}
	t := s.Make(seed)
	outcome := [][]float64{t.Outcome}
	if t.Event != nil {
		outcome = append(outcome, t.Event)
	}
	if err := WriteColumns(files.Outcome, outcome); err != nil {
		return err
	}
	return WriteColumns(files.Columns, t.Columns)
}

func exists(path string) bool {
	_, err := os.Stat(path)
	return err == nil
}

// Read reads a table that Keep wrote.
func (s Shape) Read(dir string) (Table, error) {
	t, err := s.readOutcome(dir)
	if err != nil {
		return Table{}, err
	}
	t.Columns, err = ReadColumns(s.In(dir).Columns, s.Rows, s.Cols)
	return t, err
}

// readOutcome reads a table without its columns.
func (s Shape) readOutcome(dir string) (Table, error) {
	width := 1
	if s.Family == solver.Cox {
		width = 2
	}
	columns, err := ReadColumns(s.In(dir).Outcome, s.Rows, width)
	if err != nil {
		return Table{}, fmt.Errorf("outcome: %w", err)
	}
	t := Table{Outcome: columns[0]}
	if width == 2 {
		t.Event = columns[1]
	}
	return t, nil
}
