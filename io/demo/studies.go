package demo

import (
	_ "embed"
	"slices"
)

// Study is a study of the second table, ready to be written beside it.
type Study struct {
	File  string // name of the file
	About string // what it asks, for people, in a few words
	Text  string

	// Matter names the predictors that matter, by the study's own words: a
	// group by its name, a category by its column.
	Matter []string
}

//go:embed lost.toml
var lostText string

//go:embed settlement.toml
var settlementText string

// Studies returns the studies of the second table: one of a yes-no outcome,
// one of a survival time.
func Studies() []Study {
	return []Study{
		{"lost.toml", "which measurements foretell that a batch is lost (yes-no)", lostText, columnsOf(ofLoss)},
		{"settlement.toml", "which measurements foretell how soon larvae settle (survival)", settlementText,
			slices.Concat([]string{"feed_mix", "temperature"}, columnsOf(ofSettling)[len(fewDays):])},
	}
}

// columnsOf names what has an effect.
func columnsOf(effects []effect) []string {
	names := make([]string, len(effects))
	for i, e := range effects {
		names[i] = e.column
	}
	return names
}
