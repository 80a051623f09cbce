package study_test

import (
	"fmt"

	"holdfast/io/study"
)

// A study file is checked as a whole: every problem comes with its line.
func ExampleParse() {
	text := `[table]
path = "hatchery.parquet"
[outcome]
column = "survival_d21"
[penalty]
mix = 1.5
[decision]
treshold = 0.9
`
	_, err := study.Parse("study.toml", []byte(text), nil)
	fmt.Println(err)
	// Output:
	// study: study.toml:6: penalty.mix = 1.5: must be above 0 and at most 1
	// study: study.toml:8: decision.treshold: is not a key of a study; the nearest is decision.threshold
}

// Patterns become columns in the order of the table.
func ExampleStudy_Resolve() {
	text := `[table]
path = "hatchery.parquet"
[outcome]
column = "survival_d21"
[candidates]
take  = ["sal_*", "ph"]
leave = ["sal_d1"]
`
	s, err := study.Parse("study.toml", []byte(text), []string{"penalty.relative.ph=0.5"})
	if err != nil {
		fmt.Println(err)
		return
	}
	roles, err := s.Resolve([]study.Column{
		{Name: "ph", Usable: true}, {Name: "survival_d21", Usable: true},
		{Name: "sal_d1", Usable: true}, {Name: "sal_d2", Usable: true},
		{Name: "sal_note", Reason: "text"},
	})
	fmt.Println(roles.Candidates, roles.Relative, roles.Left, roles.Excluded, err)
	// Output:
	// [ph sal_d2] [0.5 1] [sal_d1] [{sal_note text}] <nil>
}

// A group and a category are one predictor each, and a relative penalty is
// that of a predictor.
func ExampleRoles() {
	text := `[table]
path = "batches.parquet"
[outcome]
kind = "yes-no"
column = "fate"
success = "lost"
[candidates]
always = ["site"]
[candidates.groups]
salinity = ["sal_*"]
[penalty.relative]
salinity = 0.5
`
	s, err := study.Parse("study.toml", []byte(text), nil)
	if err != nil {
		fmt.Println(err)
		return
	}
	roles, err := s.Resolve([]study.Column{
		{Name: "site", Text: true}, {Name: "feed", Text: true}, {Name: "sal_d1", Usable: true},
		{Name: "ph", Usable: true}, {Name: "sal_d2", Usable: true}, {Name: "fate", Text: true},
	})
	if err != nil {
		fmt.Println(err)
		return
	}
	for i, p := range roles.Predictors {
		fmt.Println(p.Name, p.Columns, roles.Relative[i])
	}
	fmt.Println("categories", roles.Categories, "balanced", roles.Within)
	// Output:
	// feed [feed] 1
	// salinity [sal_d1 sal_d2] 0.5
	// ph [ph] 1
	// categories [site feed] balanced [outcome]
}

// A table of 240 rows and 40 candidates; the reasons stand beside the settings.
func ExampleDraft() {
	facts := study.Facts{Path: "hatchery.parquet", Outcome: "survival_d21", Rows: 240, Incomplete: 0}
	facts.Columns = []study.Fact{{Column: study.Column{Name: "survival_d21", Usable: true}}}
	for i := range 40 {
		facts.Columns = append(facts.Columns, study.Fact{Column: study.Column{Name: fmt.Sprintf("otu_%d", i), Usable: true}})
	}
	_, s, err := study.Draft(facts)
	if err != nil {
		fmt.Println(err)
		return
	}
	settled, decision, err := s.Settle(40, 120, 0)
	fmt.Printf("threshold %v, selected %d, false selections %.2f, paths stop after %d, %v\n",
		decision.Threshold, decision.Selected, *decision.FalseSelections, settled.Penalty.StopAfter, err)
	// Output:
	// threshold 0.8, selected 6, false selections 0.73, paths stop after 24, <nil>
}
