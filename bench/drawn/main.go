// Command drawn prints the rows of every draw of a plan, as CSV with the
// header draw,row, so that a program of another origin can fit the same draws:
//
//	go run ./bench/drawn -rows 442 -draws 100 -seed 11 > testdata/frequencies/diabetes_rows.csv
package main

import (
	"bufio"
	"flag"
	"fmt"
	"io"
	"os"

	"holdfast/resample"
)

func main() {
	rows := flag.Int("rows", 0, "rows of the table")
	draws := flag.Int("draws", 100, "number of draws")
	seed := flag.Uint64("seed", 1, "seed of the draws")
	flag.Parse()
	if err := write(os.Stdout, *rows, *draws, *seed); err != nil {
		fmt.Fprintln(os.Stderr, "drawn:", err)
		os.Exit(2)
	}
}

// write makes complementary halves and prints their rows.
func write(w io.Writer, rows, draws int, seed uint64) error {
	plan, err := resample.NewPlan(resample.Plan{Rows: rows, Number: draws, Seed: seed})
	if err != nil {
		return err
	}
	out := bufio.NewWriter(w)
	fmt.Fprintln(out, "draw,row")
	for d := range draws {
		for row := range resample.Drawn(plan.Sample(d)) {
			fmt.Fprintf(out, "%d,%d\n", d, row)
		}
	}
	return out.Flush()
}
