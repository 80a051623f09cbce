package demo_test

import (
	"fmt"

	"holdfast/io/demo"
)

func Example() {
	t := demo.Make(1)
	fmt.Println(len(t.Names()), "columns,", demo.Rows, "batches")
	fmt.Println("what matters first:", demo.Matter()[0])
	fmt.Println("salinity on day 7:", t.Number("salinity_d07")[:3])
	// Output:
	// 1200 columns, 240 batches
	// what matters first: temperature_d05
	// salinity on day 7: [23.9 29.58 25.97]
}
