package table_test

import (
	"context"
	"fmt"
	"log"
	"os"
	"path/filepath"

	"holdfast/io/table"
)

func Example() {
	dir, err := os.MkdirTemp("", "table")
	if err != nil {
		log.Fatal(err)
	}
	defer os.RemoveAll(dir)
	path := filepath.Join(dir, "hatchery.csv")
	text := "tank,survival,ph,salinity\nA,0.5,8.0,30\nB,0.7,8.2,\nC,0.6,8.1,34\n"
	if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
		log.Fatal(err)
	}

	source, err := table.Open(path)
	if err != nil {
		log.Fatal(err)
	}
	for _, c := range source.Columns() {
		fmt.Printf("%s: %s, usable: %v\n", c.Name, c.Kind, c.Usable)
	}
	data, err := source.Load(context.Background(), table.Request{
		Outcome:    table.Outcome{Column: "survival"},
		Candidates: []string{"ph", "salinity"},
		Missing:    table.FillMean,
	})
	if err != nil {
		log.Fatal(err)
	}
	fmt.Println(data.Candidates, data.Outcome, data.Centre[1])
	fmt.Println(data.Notes[0])
	// Output:
	// tank: text, usable: false
	// survival: number, usable: true
	// ph: number, usable: true
	// salinity: integer, usable: true
	// [ph salinity] [0.5 0.7 0.6] 32
	// fill-mean: 1 cell in 1 column takes the mean of the draw
}
