package shape

import (
	"fmt"
	"os"
	"path/filepath"
)

// Files are the paths of a shape's table in a folder.
type Files struct {
	Columns string // candidates
	Outcome string // one column
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
	cols, y := s.Make(seed)
	if err := WriteColumns(files.Outcome, [][]float64{y}); err != nil {
		return err
	}
	return WriteColumns(files.Columns, cols)
}

func exists(path string) bool {
	_, err := os.Stat(path)
	return err == nil
}

// Read reads a table that Keep wrote.
func (s Shape) Read(dir string) (cols [][]float64, outcome []float64, err error) {
	files := s.In(dir)
	cols, err = ReadColumns(files.Columns, s.Rows, s.Cols)
	if err != nil {
		return nil, nil, err
	}
	y, err := ReadColumns(files.Outcome, s.Rows, 1)
	if err != nil {
		return nil, nil, fmt.Errorf("outcome: %w", err)
	}
	return cols, y[0], nil
}
