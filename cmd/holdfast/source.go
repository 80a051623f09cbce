package main

import (
	"context"
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"strconv"
	"strings"

	"github.com/spf13/pflag"

	"holdfast/io/study"
	"holdfast/io/table"
)

// question is what a command was asked to work on: STUDY, or TABLE with an
// outcome.
type question struct {
	path    string
	outcome string
	sets    []string

	drawsTyped string // value of --draws, which stands in sets too; empty: none
}

// addFlags adds the flags that go with STUDY|TABLE.
func (q *question) addFlags(f *pflag.FlagSet) {
	f.StringVar(&q.outcome, "outcome", "", "with a table in place of a study: the outcome's column")
	f.StringArrayVar(&q.sets, "set", nil, "override a key of the study: section.key=value (repeatable)")
}

// asked is a question with its study read and its table opened.
type asked struct {
	question
	study   *study.Study
	source  *table.Source
	drafted []byte  // text of the study where it was drafted for a table
	memory  int64   // bytes that the table may take; 0: what the machine has free
	luck    float64 // of the run directory that is gone on with; 0: it follows from the decision
}

// isStudy reports whether path names a study file and not a table.
func isStudy(path string) bool { return strings.EqualFold(filepath.Ext(path), ".toml") }

// open reads the study, or drafts one for a table, and opens the table.
func (q question) open(ctx context.Context) (*asked, error) {
	if isStudy(q.path) {
		return q.openStudy()
	}
	return q.openTable(ctx)
}

func (q question) openStudy() (*asked, error) {
	if q.outcome != "" {
		return nil, misuse("holdfast: --outcome goes with a table, and "+q.path+" is a study",
			"--set outcome.column="+q.outcome+" changes the study's outcome")
	}
	s, err := q.readStudy()
	if err != nil {
		return nil, err
	}
	if err := s.CheckReady(); err != nil {
		return nil, wrong(err, "")
	}
	source, err := table.Open(s.TablePath())
	if err != nil {
		return nil, wrong(err, "")
	}
	return &asked{question: q, study: s, source: source}, nil
}

// readStudy reads the study file.
func (q question) readStudy() (*study.Study, error) {
	s, err := study.Read(q.path, q.sets)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, misuse("holdfast: "+q.path+": there is no such file",
			"holdfast draft TABLE --outcome COLUMN --out "+q.path+" writes a study for a table")
	}
	return s, q.asTyped(wrong(err, ""))
}

// asTyped names the option where a message names the --set that stands for it.
func (q question) asTyped(err error) error {
	var problems study.Problems
	if !errors.As(err, &problems) || q.drawsTyped == "" {
		return err
	}
	for _, p := range problems {
		if p.Set == q.drawsSet() {
			return misuse("holdfast: --draws "+q.drawsTyped+": "+p.Why, "")
		}
	}
	return err
}

// setDraws takes --draws N in place of the study's number.
func (q *question) setDraws(n int) {
	q.drawsTyped = strconv.Itoa(n)
	q.sets = append(q.sets, q.drawsSet())
}

func (q question) drawsSet() string { return "draws.number=" + q.drawsTyped }

// check refuses early what needs no file to be read.
func (q question) check() error {
	if isStudy(q.path) || q.outcome != "" {
		return nil
	}
	return misuse("holdfast: "+q.path+" is a table, so the outcome's column must be said",
		"add --outcome COLUMN, or give a study file (.toml)")
}

func (q question) openTable(ctx context.Context) (*asked, error) {
	if err := q.check(); err != nil {
		return nil, err
	}
	text, source, err := q.draft(ctx, filepath.Dir(q.path))
	if err != nil {
		return nil, err
	}
	// The draft stands beside the table, under a name that no file needs to
	// have.
	s, err := study.Parse(filepath.Join(filepath.Dir(q.path), q.name()+".toml"), text, q.sets)
	if err != nil {
		return nil, q.asTyped(wrong(err, ""))
	}
	if err := s.CheckReady(); err != nil {
		return nil, wrong(err, "")
	}
	return &asked{question: q, study: s, source: source, drafted: text}, nil
}

// name is the file name of the study or table without its ending.
func (q question) name() string {
	base := filepath.Base(filepath.Clean(q.path))
	base = strings.TrimSuffix(base, ".gz")
	if info, err := os.Stat(q.path); err == nil && info.IsDir() {
		return base
	}
	if name := strings.TrimSuffix(base, filepath.Ext(base)); name != "" {
		return name
	}
	return base
}

// runPath is NAME.run beside the study or table.
func (q question) runPath() string {
	return filepath.Join(filepath.Dir(filepath.Clean(q.path)), q.name()+".run")
}

// columns are the table's columns in the words of package study.
func (a *asked) columns() []study.Column {
	var cols []study.Column
	for _, c := range a.source.Columns() {
		cols = append(cols, columnOf(c))
	}
	return cols
}

// columnOf is a column of the table in the words of package study.
func columnOf(c table.Column) study.Column {
	return study.Column{Name: c.Name, Usable: c.Usable, Reason: c.Reason, Text: c.Kind == table.Text}
}

// policy is the study's rule for missing values in the words of package table.
func policy(m study.Missing) table.Policy {
	switch m {
	case study.DropRows:
		return table.DropRows
	case study.FillMean:
		return table.FillMean
	}
	return table.Refuse
}
