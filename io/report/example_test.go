package report_test

import (
	"bytes"
	"encoding/csv"
	"fmt"

	"holdfast/io/report"
	"holdfast/selection"
)

// Two draws of a hatchery study, judged and written as CSV.
func Example() {
	draws := []selection.Draw{
		{Number: 0, Last: 4, Complete: true, Entries: []selection.Entry{{Predictor: 1, Step: 2}}, Coefs: []selection.Coef{{Step: 4, Predictor: 1, Value: 0.5}}},
		{Number: 1, Last: 4, Complete: true, Entries: []selection.Entry{{Predictor: 1, Step: 3}}, Coefs: []selection.Coef{{Step: 4, Predictor: 1, Value: 0.25}}},
	}
	j, err := selection.Judge(draws, false,
		selection.Predictors{Names: []string{"ph", "salinity, psu"}, Deviations: []float64{0.1, 2}},
		selection.Decision{Region: selection.Cap, Bound: selection.WorstCase, Threshold: 1, Selected: 1})
	if err != nil {
		panic(err)
	}
	var table bytes.Buffer
	if err := report.WriteStabilityCSV(&table, j, false); err != nil {
		panic(err)
	}
	records, err := csv.NewReader(&table).ReadAll()
	if err != nil {
		panic(err)
	}
	for _, r := range records {
		fmt.Println(r[0], "|", r[1], "|", r[7], "|", r[10], "|", r[12])
	}
	// Output:
	// predictor | frequency | coef_median | selected_coef_median | stable
	// salinity, psu | 1 | 0.375 | 0.375 | true
	// ph | 0 | 0 |  | false
}
