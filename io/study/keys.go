package study

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"sort"
	"strconv"
	"strings"

	"holdfast/selection"
	"holdfast/solver"
)

// field reads one key into a study and writes it back.
type field interface {
	set(s *Study, v value) error
	toml(s *Study) (text string, given bool)
}

// mapField reads keys that the user names, such as columns.
type mapField interface {
	clear(s *Study)
	put(s *Study, name string, v value) error
	toml(s *Study) []string // lines "name = value", in order of name
}

// key is one key of the study file.
type key struct {
	name    string
	about   string // comment beside it in a written study
	field   field
	entries mapField // in place of field: a section of the user's own names
}

// section is one section of the study file.
type section struct {
	name string
	keys []key
}

// sections is every key of the study file, in the order it is written.
var sections = []section{
	{"table", []key{
		{name: "path", about: ".parquet .arrow .feather .csv .csv.gz, or a folder or glob of Parquet files; relative to this file",
			field: textField{func(s *Study) *string { return &s.Table.Path }}},
		{name: "missing", about: "missing values: " + anyOf(missings),
			field: wordField[Missing]{missings, func(s *Study) *Missing { return &s.Table.Missing }}},
		{name: "accept_loss", about: "true: drop-rows may lose more than a tenth of the rows",
			field: boolField{func(s *Study) *bool { return &s.Table.AcceptLoss }}},
	}},
	{"outcome", []key{
		{name: "kind", about: anyOf(kinds),
			field: wordField[Kind]{kinds, func(s *Study) *Kind { return &s.Outcome.Kind }}},
		{name: "column", field: optionalText{textField{func(s *Study) *string { return &s.Outcome.Column }}, not(Survival)}},
		{name: "success", about: "the value that counts as yes, or as an event, compared as text",
			field: levelField{optionalText{textField{func(s *Study) *string { return &s.Outcome.Success }}, only(YesNo, Survival)}}},
		{name: "time", field: optionalText{textField{func(s *Study) *string { return &s.Outcome.Time }}, only(Survival)}},
		{name: "event", about: "column that tells events: 1, true, or the value of success",
			field: optionalText{textField{func(s *Study) *string { return &s.Outcome.Event }}, only(Survival)}},
		{name: "entry", about: "time from which a row is at risk; empty: from the start",
			field: optionalText{textField{func(s *Study) *string { return &s.Outcome.Entry }}, only(Survival)}},
		{name: "ties", about: anyOf(allTies),
			field: optionalWord[Ties]{wordField[Ties]{allTies, func(s *Study) *Ties { return &s.Outcome.Ties }}, only(Survival)}},
		{name: "strata", about: "columns with a baseline hazard of their own",
			field: optionalList{listField{func(s *Study) *[]string { return &s.Outcome.Strata }}, only(Survival)}},
		{name: "offset", about: "column added to the linear predictor; empty: none",
			field: textField{func(s *Study) *string { return &s.Outcome.Offset }}},
		{name: "exposure", about: "column whose logarithm is added; empty: none",
			field: optionalText{textField{func(s *Study) *string { return &s.Outcome.Exposure }}, only(Count)}},
		{name: "case_weight", about: "column of case weights; empty: all 1",
			field: textField{func(s *Study) *string { return &s.Outcome.CaseWeight }}},
	}},
	{"candidates", []key{
		{name: "take", about: "names or patterns; columns with another role are never candidates",
			field: listField{func(s *Study) *[]string { return &s.Candidates.Take }}},
		{name: "leave", about: "names or patterns left out",
			field: listField{func(s *Study) *[]string { return &s.Candidates.Leave }}},
		{name: "always", about: "in every model, not penalised",
			field: listField{func(s *Study) *[]string { return &s.Candidates.Always }}},
		{name: "categories", about: "names or patterns; boolean or integer columns to be read as categories, as text is anyway",
			field: listField{func(s *Study) *[]string { return &s.Candidates.Categories }}},
		{name: "reference", about: "reference level of a category; default: the first in byte order",
			entries: textMap{func(s *Study) map[string]string { return s.Candidates.Reference }}},
		{name: "groups", about: "names or patterns; candidates that enter together",
			entries: listMap{func(s *Study) map[string][]string { return s.Candidates.Groups }}},
	}},
	{"penalty", []key{
		{name: "mix", about: "1: the lasso; less: elastic net",
			field: realField{func(s *Study) *float64 { return &s.Penalty.Mix }}},
		{name: "scale", about: "units of the penalty: " + anyOf(scales),
			field: wordField[solver.Scale]{scales, func(s *Study) *solver.Scale { return &s.Penalty.Scale }}},
		{name: "jitter", about: "1: no randomised penalties",
			field: realField{func(s *Study) *float64 { return &s.Penalty.Jitter }}},
		{name: "group_weight", about: anyOf(groupWeights),
			field: wordField[GroupWeight]{groupWeights, func(s *Study) *GroupWeight { return &s.Penalty.GroupWeight }}},
		{name: "ratio", about: "lambda from step to step",
			field: realField{func(s *Study) *float64 { return &s.Penalty.Ratio }}},
		{name: "floor", about: "last lambda as a share of lambda_max",
			field: realField{func(s *Study) *float64 { return &s.Penalty.Floor }}},
		{name: "stop_after", about: "predictors after which a path stops; 0: four times selected, at most units in a half - 2 - always-in, at least 1",
			field: wholeField[int]{func(s *Study) *int { return &s.Penalty.StopAfter }}},
		{name: "relative", about: "relative penalty of single predictors",
			entries: realMap{func(s *Study) map[string]float64 { return s.Penalty.Relative }}},
	}},
	{"draws", []key{
		{name: "design", about: anyOf(designs),
			field: wordField[Design]{designs, func(s *Study) *Design { return &s.Draws.Design }}},
		{name: "number", about: "draws; two halves make a pair",
			field: wholeField[int]{func(s *Study) *int { return &s.Draws.Number }}},
		{name: "seed", about: "same study, table and seed: same result",
			field: wholeField[uint64]{func(s *Study) *uint64 { return &s.Draws.Seed }}},
		{name: "together", about: "columns whose equal values are drawn whole",
			field: listField{func(s *Study) *[]string { return &s.Draws.Together }}},
		{name: "within", about: `columns to be balanced; "outcome": its classes or event status`,
			field: listField{func(s *Study) *[]string { return &s.Draws.Within }}},
	}},
	{"decision", []key{
		{name: "region", about: anyOf(regions),
			field: wordField[selection.Region]{regions, func(s *Study) *selection.Region { return &s.Decision.Region }}},
		{name: "threshold", about: "share of draws from which a predictor is stable",
			field: numberField{func(s *Study) **float64 { return &s.Decision.Threshold }, false}},
		{name: "selected", about: "most predictors that count in a draw",
			field: numberField{func(s *Study) **float64 { return &s.Decision.Selected }, true}},
		{name: "false_selections", about: "expected by luck, at most; two of threshold, selected, false_selections",
			field: numberField{func(s *Study) **float64 { return &s.Decision.FalseSelections }, false}},
		{name: "bound", about: anyOf(bounds),
			field: wordField[selection.BoundName]{bounds, func(s *Study) *selection.BoundName { return &s.Decision.Bound }}},
	}},
}

// sectionNamed finds a section.
func sectionNamed(name string) (section, bool) {
	for _, s := range sections {
		if s.name == name {
			return s, true
		}
	}
	return section{}, false
}

// keyNamed finds a key of the section.
func (s section) keyNamed(name string) (key, bool) {
	for _, k := range s.keys {
		if k.name == name {
			return k, true
		}
	}
	return key{}, false
}

// choice is a value that is written as one word of a few.
type choice interface {
	comparable
	String() string
}

// The words of each choice, in the order in which messages list them.
var (
	missings     = []Missing{Refuse, DropRows, FillMean, OwnLevel}
	kinds        = []Kind{Number, YesNo, Count, Classes, Survival}
	allTies      = []Ties{Efron, Breslow}
	groupWeights = []GroupWeight{Even, Sqrt}
	designs      = []Design{Halves, Bootstrap}
	scales       = []solver.Scale{solver.ScaleDraw, solver.ScaleTable, solver.ScaleNone}
	regions      = []selection.Region{selection.Cap, selection.Common}
	bounds       = []selection.BoundName{selection.WorstCase, selection.Unimodal, selection.RConcave}
)

// anyOf lists the words a key may take, for the comment beside it.
func anyOf[T choice](all []T) string {
	words := make([]string, len(all))
	for i, c := range all {
		words[i] = c.String()
	}
	return strings.Join(words, " | ")
}

// textField is a text.
type textField struct{ at func(*Study) *string }

func (f textField) set(s *Study, v value) error {
	text, ok := v.asText()
	if !ok {
		return fmt.Errorf("must be a text in double quotes")
	}
	*f.at(s) = text
	return nil
}

func (f textField) toml(s *Study) (string, bool) { return quoted(*f.at(s)), true }

// optionalText is a text that is written only where the outcome's kind has
// it, or where it was given.
type optionalText struct {
	textField
	shown func(*Study) bool
}

func (f optionalText) toml(s *Study) (string, bool) {
	return quoted(*f.at(s)), f.shown(s) || *f.at(s) != ""
}

// levelField is a value of a column: text, number or truth, kept as text.
type levelField struct{ optionalText }

func (f levelField) set(s *Study, v value) error {
	text, err := levelOf(v)
	if err == nil {
		*f.at(s) = text
	}
	return err
}

// levelOf reads a value that is compared as text.
func levelOf(v value) (string, error) {
	switch v.shape {
	case textShape, wholeShape, realShape, boolShape:
		return v.text, nil
	}
	return "", fmt.Errorf("must be a value of the column, such as \"alive\", 1 or true")
}

// boolField is true or false.
type boolField struct{ at func(*Study) *bool }

func (f boolField) set(s *Study, v value) error {
	if v.shape != boolShape {
		return fmt.Errorf("must be true or false")
	}
	*f.at(s) = v.text == "true"
	return nil
}

func (f boolField) toml(s *Study) (string, bool) { return strconv.FormatBool(*f.at(s)), true }

// realField is a finite number.
type realField struct{ at func(*Study) *float64 }

func (f realField) set(s *Study, v value) error {
	x, err := finite(v)
	if err == nil {
		*f.at(s) = x
	}
	return err
}

func (f realField) toml(s *Study) (string, bool) { return realText(*f.at(s)), true }

// finite reads a number that is neither infinite nor NaN.
func finite(v value) (float64, error) {
	if v.shape != wholeShape && v.shape != realShape {
		return 0, fmt.Errorf("must be a number%s", numberMeant(v))
	}
	x, err := v.real()
	if err != nil || math.IsNaN(x) || math.IsInf(x, 0) {
		return 0, fmt.Errorf("must be a finite number")
	}
	return x, nil
}

// numberMeant says how TOML writes what looks like a number.
func numberMeant(v value) string {
	x, err := strconv.ParseFloat(v.text, 64)
	if v.shape != textShape || err != nil || math.IsNaN(x) || math.IsInf(x, 0) {
		return ""
	}
	return ": write " + realText(x) + ", without quotes"
}

// realText is a number as TOML writes it, in the fewest digits that read back
// the same.
func realText(x float64) string {
	switch {
	case math.IsNaN(x):
		return "nan"
	case math.IsInf(x, 1):
		return "inf"
	case math.IsInf(x, -1):
		return "-inf"
	}
	s := strconv.FormatFloat(x, 'g', -1, 64)
	if strings.ContainsAny(s, ".e") {
		return s
	}
	return s + ".0"
}

// numberField is a finite number that may be left out.
type numberField struct {
	at    func(*Study) **float64
	whole bool // written without a point where it has no fraction
}

func (f numberField) set(s *Study, v value) error {
	x, err := finite(v)
	if err == nil {
		*f.at(s) = &x
	}
	return err
}

func (f numberField) toml(s *Study) (string, bool) {
	x := *f.at(s)
	if x == nil {
		return "", false
	}
	if f.whole {
		return strconv.FormatFloat(*x, 'f', -1, 64), true
	}
	return realText(*x), true
}

// wholeField is a whole number, not negative.
type wholeField[T int | uint64] struct{ at func(*Study) *T }

func (f wholeField[T]) set(s *Study, v value) error {
	x, err := v.whole()
	switch {
	case v.shape == wholeShape && err != nil, v.shape == textShape && errors.Is(err, strconv.ErrRange):
		return fmt.Errorf("must be a whole number of at most %d", math.MaxInt64)
	case v.shape != wholeShape:
		return fmt.Errorf("must be a whole number")
	}
	if x < 0 {
		return fmt.Errorf("must not be negative")
	}
	if int64(T(x)) != x {
		return fmt.Errorf("is too large for this machine")
	}
	*f.at(s) = T(x)
	return nil
}

func (f wholeField[T]) toml(s *Study) (string, bool) { return fmt.Sprint(*f.at(s)), true }

// wordField is one of a few words.
type wordField[T choice] struct {
	all []T
	at  func(*Study) *T
}

func (f wordField[T]) set(s *Study, v value) error {
	shown := make([]string, len(f.all))
	for i, c := range f.all {
		if v.shape == textShape && v.text == c.String() {
			*f.at(s) = c
			return nil
		}
		shown[i] = quoted(c.String())
	}
	return fmt.Errorf("must be one of %s", strings.Join(shown, ", "))
}

func (f wordField[T]) toml(s *Study) (string, bool) { return quoted((*f.at(s)).String()), true }

// optionalWord is a word that is written only where the outcome's kind has
// it, or where it is not the default, which is the first.
type optionalWord[T choice] struct {
	wordField[T]
	shown func(*Study) bool
}

func (f optionalWord[T]) toml(s *Study) (string, bool) {
	text, _ := f.wordField.toml(s)
	return text, f.shown(s) || *f.at(s) != f.all[0]
}

// listField is a list of texts.
type listField struct{ at func(*Study) *[]string }

func (f listField) set(s *Study, v value) error {
	list, err := textsOf(v)
	if err == nil {
		*f.at(s) = list
	}
	return err
}

func (f listField) toml(s *Study) (string, bool) { return listText(*f.at(s)), true }

// optionalList is a list that is written only where the outcome's kind has
// it, or where it is not empty.
type optionalList struct {
	listField
	shown func(*Study) bool
}

func (f optionalList) toml(s *Study) (string, bool) {
	return listText(*f.at(s)), f.shown(s) || len(*f.at(s)) > 0
}

// textsOf reads a list of texts.
func textsOf(v value) ([]string, error) {
	if v.shape != listShape {
		return nil, fmt.Errorf(`must be a list of texts, such as ["a", "b"]`)
	}
	list := make([]string, 0, len(v.list))
	for i, e := range v.list {
		text, ok := e.asText()
		if !ok {
			return nil, fmt.Errorf("must be a list of texts, but its element %d is %v: put it in double quotes", i+1, e)
		}
		list = append(list, text)
	}
	return list, nil
}

// listText is a list of texts as TOML writes it, long ones a line each.
func listText(list []string) string {
	shown := make([]string, len(list))
	width := 0
	for i, e := range list {
		shown[i] = quoted(e)
		width += len(shown[i])
	}
	if width > 90 {
		return "[\n  " + strings.Join(shown, ",\n  ") + ",\n]"
	}
	return "[" + strings.Join(shown, ", ") + "]"
}

// textMap, realMap and listMap are sections of the user's own names.
type textMap struct {
	of func(*Study) map[string]string
}

func (f textMap) clear(s *Study) { clear(f.of(s)) }

func (f textMap) put(s *Study, name string, v value) error {
	text, err := levelOf(v)
	if err == nil {
		f.of(s)[name] = text
	}
	return err
}

func (f textMap) toml(s *Study) []string { return entryLines(f.of(s), quoted) }

type realMap struct {
	of func(*Study) map[string]float64
}

func (f realMap) clear(s *Study) { clear(f.of(s)) }

func (f realMap) put(s *Study, name string, v value) error {
	x, err := finite(v)
	if err == nil {
		f.of(s)[name] = x
	}
	return err
}

func (f realMap) toml(s *Study) []string { return entryLines(f.of(s), realText) }

type listMap struct {
	of func(*Study) map[string][]string
}

func (f listMap) clear(s *Study) { clear(f.of(s)) }

func (f listMap) put(s *Study, name string, v value) error {
	list, err := textsOf(v)
	if err == nil {
		f.of(s)[name] = list
	}
	return err
}

func (f listMap) toml(s *Study) []string { return entryLines(f.of(s), listText) }

// entryLines writes a map in byte order of its names, so that equal studies
// are equal texts.
func entryLines[V any](m map[string]V, text func(V) string) []string {
	names := make([]string, 0, len(m))
	for name := range m {
		names = append(names, name)
	}
	sort.Strings(names)
	for i, name := range names {
		names[i] = keyName(name) + " = " + text(m[name])
	}
	return names
}

// only says whether the outcome is of one of these kinds.
func only(kinds ...Kind) func(*Study) bool {
	return func(s *Study) bool { return slices.Contains(kinds, s.Outcome.Kind) }
}

// not says whether the outcome is of another kind.
func not(k Kind) func(*Study) bool { return func(s *Study) bool { return s.Outcome.Kind != k } }
