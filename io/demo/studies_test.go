package demo_test

import (
	"context"
	"path/filepath"
	"slices"
	"testing"

	"holdfast/io/demo"
	"holdfast/io/study"
	"holdfast/io/table"
)

// TestStudies: the studies of the second table are studies of that table that
// can be run, and what they are told matters is a predictor of theirs.
func TestStudies(t *testing.T) {
	dir := t.TempDir()
	if err := demo.MakeBatches(1).Write(filepath.Join(dir, demo.BatchesFile)); err != nil {
		t.Fatal(err)
	}
	want := map[string]study.Kind{"lost.toml": study.YesNo, "settlement.toml": study.Survival}
	for _, s := range demo.Studies() {
		read, err := study.Parse(filepath.Join(dir, s.File), []byte(s.Text), nil)
		if err != nil {
			t.Fatal(err)
		}
		if err := read.CheckReady(); err != nil {
			t.Errorf("%s: %v", s.File, err)
		}
		if read.Outcome.Kind != want[s.File] || s.About == "" {
			t.Errorf("%s: kind %v, about %q", s.File, read.Outcome.Kind, s.About)
		}
		roles, err := read.Resolve(columns(t, read.TablePath()))
		if err != nil {
			t.Fatal(err)
		}
		checkPredictors(t, s, roles)
		if _, d, err := read.Settle(len(roles.Predictors), demo.Batches/2, 3); err != nil || *d.FalseSelections > 1 {
			t.Errorf("%s: %+v, %v", s.File, d, err)
		}
	}
}

// columns are those of a table, as the commands hand them over.
func columns(t *testing.T, path string) []study.Column {
	t.Helper()
	source, err := table.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := source.Scan(context.Background(), ""); err != nil {
		t.Fatal(err)
	}
	var list []study.Column
	for _, c := range source.Columns() {
		list = append(list, study.Column{Name: c.Name, Usable: c.Usable, Reason: c.Reason, Text: c.Kind == table.Text})
	}
	return list
}

func checkPredictors(t *testing.T, s demo.Study, roles *study.Roles) {
	t.Helper()
	var names []string
	for _, p := range roles.Predictors {
		names = append(names, p.Name)
	}
	for _, name := range s.Matter {
		if !slices.Contains(names, name) {
			t.Errorf("%s: %s matters and is no predictor", s.File, name)
		}
	}
	for _, name := range []string{"batch_id", "fate", "settlement_day", "settled", "site"} {
		if slices.Contains(names, name) {
			t.Errorf("%s: %s is a predictor", s.File, name)
		}
	}
	if !slices.Contains(roles.Categories, "feed_mix") {
		t.Errorf("%s: categories %q", s.File, roles.Categories)
	}
}
