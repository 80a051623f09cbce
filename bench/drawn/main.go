// Command drawn prints the rows of every draw of a plan, as CSV with the
// header draw,row, so that a program of another origin can fit the same draws:
//
//	go run ./bench/drawn -rows 442 -draws 100 -seed 11 > testdata/frequencies/diabetes_rows.csv
//
// Halves are balanced by a column of a table where one is named:
//
//	go run ./bench/drawn -table testdata/data/breast_cancer.csv -within malignant -draws 100 -seed 13 > testdata/frequencies/breast_cancer_rows.csv
package main

import (
	"bufio"
	"encoding/csv"
	"flag"
	"fmt"
	"io"
	"os"
	"slices"

	"holdfast/resample"
)

func main() {
	plan := resample.Plan{}
	flag.IntVar(&plan.Rows, "rows", 0, "rows of the table; not with -table")
	flag.IntVar(&plan.Number, "draws", 100, "number of draws")
	flag.Uint64Var(&plan.Seed, "seed", 1, "seed of the draws")
	table := flag.String("table", "", "CSV with the column of -within")
	within := flag.String("within", "", "column by whose values halves are balanced")
	flag.Parse()
	if err := run(plan, *table, *within); err != nil {
		fmt.Fprintln(os.Stderr, "drawn:", err)
		os.Exit(2)
	}
}

func run(plan resample.Plan, table, within string) error {
	if table != "" {
		codes, err := strata(table, within)
		if err != nil {
			return err
		}
		plan.Rows, plan.Within = len(codes), codes
	}
	return write(os.Stdout, plan)
}

// strata numbers the values of a column of a CSV.
func strata(path, column string) ([]int32, error) {
	file, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer file.Close()
	records, err := csv.NewReader(file).ReadAll()
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	if len(records) == 0 || !slices.Contains(records[0], column) {
		return nil, fmt.Errorf("%s: no column %q: name one with -within", path, column)
	}
	at := slices.Index(records[0], column)
	var values []string
	var codes []int32
	for _, record := range records[1:] {
		if !slices.Contains(values, record[at]) {
			values = append(values, record[at])
		}
		codes = append(codes, int32(slices.Index(values, record[at])))
	}
	return codes, nil
}

// write makes complementary halves and prints their rows.
func write(w io.Writer, asked resample.Plan) error {
	plan, err := resample.NewPlan(asked)
	if err != nil {
		return err
	}
	out := bufio.NewWriter(w)
	fmt.Fprintln(out, "draw,row")
	for d := range plan.Number {
		for row := range resample.Drawn(plan.Sample(d)) {
			fmt.Fprintf(out, "%d,%d\n", d, row)
		}
	}
	return out.Flush()
}
