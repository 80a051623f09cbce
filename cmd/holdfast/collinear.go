package main

import (
	"context"
	"fmt"
	"math"
	"runtime"
	"sync/atomic"

	"golang.org/x/sync/errgroup"

	"holdfast/io/table"
	"holdfast/solver/kernel"
)

// nearR is the correlation from which two columns are called nearly the same.
// A lasso splits its votes between them.
const nearR = 0.95

// manyProducts is the number of products from which a comparison of all pairs
// is announced: some ten seconds.
const manyProducts = 2e10

// tellPairs says beforehand that comparing all pairs will take a while.
func (p *program) tellPairs(columns, rows int) {
	if float64(columns)*float64(columns)/2*float64(rows) > manyProducts {
		fmt.Fprintf(p.err, "comparing %d columns with each other; --quick leaves this out\n", columns)
	}
}

// nearlySame finds for each column the one before it that it resembles most,
// where |r| >= nearR. Missing cells stand at the mean.
func nearlySame(ctx context.Context, data *table.Data, cols []int32) ([]likeness, error) {
	rows, _ := data.X.Dims()
	views := data.X.Panel(cols, 0, rows, nil)
	best := make([]likeness, len(cols))
	var next atomic.Int64
	g, ctx := errgroup.WithContext(ctx)
	for range runtime.GOMAXPROCS(0) {
		g.Go(func() error {
			for {
				// The last columns have most to compare, so they go first.
				j := len(cols) - int(next.Add(1))
				if j < 1 {
					return ctx.Err()
				}
				if err := ctx.Err(); err != nil {
					return err
				}
				best[j] = nearest(data, cols, views, j)
			}
		})
	}
	if err := g.Wait(); err != nil {
		return nil, err
	}
	var list []likeness
	for _, b := range best {
		if b.Column != "" {
			list = append(list, b)
		}
	}
	return list, nil
}

// nearest compares column j with those before it.
func nearest(data *table.Data, cols []int32, views [][]float64, j int) (b likeness) {
	for i := range j {
		r := kernel.Dot(views[i], views[j]) / (float64(len(views[j])) * data.Deviation[cols[i]] * data.Deviation[cols[j]])
		if math.Abs(r) >= nearR && math.Abs(r) > math.Abs(b.R) {
			b = likeness{data.Candidates[cols[j]], data.Candidates[cols[i]], r}
		}
	}
	return b
}
