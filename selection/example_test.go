package selection_test

import (
	"encoding/json"
	"fmt"

	"holdfast/selection"
)

// What must the threshold be if 30 of 1,000 candidates are chosen per half and
// at most one false selection is wanted?
func ExampleSolveBudget() {
	selected, most := 30.0, 1.0
	b, err := selection.SolveBudget(selection.Request{Candidates: 1000, Draws: 100, Selected: &selected, FalseSelections: &most})
	if err != nil {
		fmt.Println(err)
		return
	}
	for _, v := range b.Bounds {
		fmt.Printf("%s: stable from %d of 100 draws on, threshold %g\n", v.Name, *v.Need, *v.Threshold)
	}
	// Output:
	// worst-case: stable from 95 of 100 draws on, threshold 0.95
	// unimodal: stable from 73 of 100 draws on, threshold 0.73
	// r-concave: stable from 58 of 100 draws on, threshold 0.58
}

// The object of `budget --json`. A number that cannot be had is null, with the
// reason.
func ExampleBudget_MarshalJSON() {
	threshold, selected := 0.6, 3.0
	b, err := selection.SolveBudget(selection.Request{Candidates: 4, Draws: 10, Threshold: &threshold, Selected: &selected})
	if err != nil {
		fmt.Println(err)
		return
	}
	text, _ := json.MarshalIndent(b, "", " ")
	fmt.Println(string(text))
	// Output:
	// {
	//  "candidates": 4,
	//  "draws": 10,
	//  "threshold": 0.6,
	//  "selected": 3,
	//  "need": 6,
	//  "attained": 0.6,
	//  "bounds": {
	//   "worst-case": {
	//    "false_selections": 11.25
	//   },
	//   "unimodal": {
	//    "false_selections": null,
	//    "why": "the unimodal bound needs a count of at least 7 of 10 draws, half of them and 2 more"
	//   },
	//   "r-concave": {
	//    "false_selections": 4
	//   }
	//  }
	// }
}

// Two pairs of halves of a hatchery's batches. Salinity is chosen in all four
// draws; in draw 3 the third predictor to enter is one too many.
func ExampleJudge() {
	entry := func(predictor, step int32) selection.Entry {
		return selection.Entry{Predictor: predictor, Step: step}
	}
	var draws []selection.Draw
	for number, entries := range [][]selection.Entry{
		{entry(0, 1), entry(2, 3)},
		{entry(0, 2)},
		{entry(0, 1)},
		{entry(2, 1), entry(0, 2), entry(1, 4)},
	} {
		draws = append(draws, selection.Draw{Number: number, First: 0, Last: 5, Complete: true, Entries: entries})
	}
	hatchery := selection.Predictors{
		Names:      []string{"salinity", "ph", "feed_rate"},
		Deviations: []float64{1.2, 0.1, 3},
	}
	threshold, selected := 0.9, 2.0
	rule, err := selection.Decide(selection.Ask{Bound: selection.WorstCase, Threshold: &threshold, Selected: &selected}, 3, 4, false, 0)
	if err != nil {
		fmt.Println(err)
		return
	}
	j, err := selection.Judge(draws, false, hatchery, rule)
	if err != nil {
		fmt.Println(err)
		return
	}
	for _, r := range j.Rows {
		fmt.Printf("%s: chosen in %d of %d draws, in both halves of %g of the pairs, stable %t\n",
			r.Predictor, r.Count, j.Draws, *r.BothHalves, r.Stable)
	}
	// Output:
	// salinity: chosen in 4 of 4 draws, in both halves of 1 of the pairs, stable true
	// feed_rate: chosen in 2 of 4 draws, in both halves of 0 of the pairs, stable false
	// ph: chosen in 0 of 4 draws, in both halves of 0 of the pairs, stable false
}
