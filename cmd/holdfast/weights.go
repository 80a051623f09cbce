package main

import (
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"strconv"
	"strings"
)

// weights reads a file of case weights and returns those of the rows used;
// nil where no file is named.
func (l *loaded) weights(path string) ([]float64, error) {
	if path == "" {
		return nil, nil
	}
	if column := l.study.Outcome.CaseWeight; column != "" {
		return nil, misuse(fmt.Sprintf("holdfast fit: --case-weights: the study has case weights already, in column %q", column),
			"leave --case-weights out, or take those of the study out with --set outcome.case_weight=")
	}
	all, err := readWeights(path)
	if err != nil {
		return nil, wrong(err, "")
	}
	if len(all) != l.data.TableRows {
		return nil, wrong(fmt.Errorf("holdfast: %s: %d weights for a table of %d rows", path, len(all), l.data.TableRows),
			"one line for every row of the table, under one header line")
	}
	if l.data.Rows == nil {
		return all, nil
	}
	used := make([]float64, len(l.data.Rows))
	for i, row := range l.data.Rows {
		used[i] = all[row]
	}
	return used, nil
}

// readWeights reads a CSV of one column with a header.
func readWeights(path string) ([]float64, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("holdfast: case weights: %w", err)
	}
	defer f.Close()
	r := csv.NewReader(f)
	r.FieldsPerRecord = -1
	switch head, err := r.Read(); {
	case errors.Is(err, io.EOF):
		return nil, fmt.Errorf("holdfast: %s: the file is empty: case weights are one column under a header", path)
	case err != nil:
		return nil, fmt.Errorf("holdfast: %s: %w", path, err)
	case len(head) != 1:
		return nil, fmt.Errorf("holdfast: %s: the header has %d columns: case weights are one column under a header", path, len(head))
	}
	var all []float64
	for {
		cells, err := r.Read()
		if errors.Is(err, io.EOF) {
			return all, nil
		}
		if err != nil {
			return nil, fmt.Errorf("holdfast: %s: %w", path, err)
		}
		if len(cells) != 1 {
			line, _ := r.FieldPos(0)
			return nil, fmt.Errorf("holdfast: %s:%d: %d columns: case weights are one column under a header", path, line, len(cells))
		}
		w, err := strconv.ParseFloat(strings.TrimSpace(cells[0]), 64)
		if err != nil || !(w >= 0) || math.IsInf(w, 0) {
			line, _ := r.FieldPos(0)
			return nil, fmt.Errorf("holdfast: %s:%d: %q is no weight: a finite number, 0 or more", path, line, cells[0])
		}
		all = append(all, w)
	}
}
