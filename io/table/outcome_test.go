package table

import (
	"fmt"
	"math"
	"math/big"
	"math/rand/v2"
	"path/filepath"
	"reflect"
	"slices"
	"strings"
	"testing"

	"github.com/apache/arrow/go/v17/arrow"
	"gonum.org/v1/gonum/floats/scalar"
)

// inEveryFormat writes a table as Parquet, Arrow and CSV.
func inEveryFormat(t testing.TB, cols []testColumn) []string {
	t.Helper()
	dir := t.TempDir()
	return []string{
		writeParquet(t, filepath.Join(dir, "t.parquet"), cols, 5),
		writeArrow(t, filepath.Join(dir, "t.arrow"), cols, 100, false),
		writeCSV(t, filepath.Join(dir, "t.csv"), cols),
	}
}

// larvae is a table of 12 batches of larvae with an outcome of every kind.
func larvae() []testColumn {
	dictionary := &arrow.DictionaryType{IndexType: arrow.PrimitiveTypes.Int8, ValueType: arrow.BinaryTypes.String}
	return []testColumn{
		{"ph", arrow.PrimitiveTypes.Float64, []any{8.0, 8.1, 7.9, 8.2, 8.05, 7.8, 8.3, 8.15, 7.95, 8.25, 8.12, 8.01}},
		{"lost", arrow.FixedWidthTypes.Boolean, []any{true, false, false, true, false, true, false, false, true, false, false, true}},
		{"fate", dictionary, []any{"alive", "dead", "alive", "dead", "dead", "alive", "alive", "dead", "alive", "alive", "dead", "alive"}},
		{"stage", arrow.BinaryTypes.String, []any{"veliger", "spat", "pediveliger", "spat", "veliger", "spat", "spat", "pediveliger", "veliger", "spat", "veliger", "spat"}},
		{"grade", arrow.PrimitiveTypes.Int32, []any{10, 2, 2, 10, 3, 3, 2, 10, 2, 3, 10, 2}},
		{"spat_count", arrow.PrimitiveTypes.Int64, []any{0, 3, 12, 5, 7, 0, 1, 40, 2, 2, 8, 9}},
		{"days", arrow.PrimitiveTypes.Float64, []any{18.5, 21.0, 14.0, 30.0, 22.0, 19.0, 16.5, 30.0, 25.0, 20.0, 17.0, 28.0}},
		{"settled", arrow.PrimitiveTypes.Int8, []any{1, 1, 1, 0, 1, 1, 1, 0, 1, 1, 1, 0}},
		{"joined", arrow.PrimitiveTypes.Float64, []any{0.0, 0.0, 2.0, 0.0, 1.5, 0.0, 0.0, 3.0, 0.0, 0.0, 0.0, 4.0}},
		{"site", arrow.BinaryTypes.String, []any{"north", "south", "north", "west", "south", "north", "west", "south", "north", "west", "south", "north"}},
		{"litres", arrow.PrimitiveTypes.Float64, []any{1.0, 2.5, 10.0, 4.0, 0.5, 1.0, 2.0, 3.0, 1.0, 1.0, 7.0, 100.0}},
		{"shift", arrow.PrimitiveTypes.Float64, []any{0.5, 0.0, -1.0, 0.0, 0.0, 0.25, 0.0, 0.0, 0.0, 0.0, 0.0, 2.0}},
		{"w", arrow.PrimitiveTypes.Float64, []any{1.0, 2.0, 1.0, 0.0, 1.0, 1.0, 0.5, 1.0, 1.0, 1.0, 1.0, 1.0}},
	}
}

func cellsOf(cols []testColumn, name string) []any {
	for _, c := range cols {
		if c.name == name {
			return c.cells
		}
	}
	return nil
}

// Every way of reading an outcome gives the same data from every format.
func TestOutcomes(t *testing.T) {
	cols := larvae()
	paths := inEveryFormat(t, cols)
	for name, c := range map[string]struct {
		outcome Outcome
		classes string
		value   func(i int) float64
	}{
		"number":           {Outcome{Column: "days"}, "[]", func(i int) float64 { return cellsOf(cols, "days")[i].(float64) }},
		"count":            {Outcome{Measure: AsCount, Column: "spat_count"}, "[]", func(i int) float64 { return float64(cellsOf(cols, "spat_count")[i].(int)) }},
		"yes-no text":      {Outcome{Measure: AsYesNo, Column: "fate", Success: "alive"}, "[dead alive]", func(i int) float64 { return is(cellsOf(cols, "fate")[i] == "alive") }},
		"yes-no first":     {Outcome{Measure: AsYesNo, Column: "fate", Success: "dead"}, "[alive dead]", func(i int) float64 { return is(cellsOf(cols, "fate")[i] == "dead") }},
		"yes-no true":      {Outcome{Measure: AsYesNo, Column: "lost", Success: "true"}, "[false true]", func(i int) float64 { return is(cellsOf(cols, "lost")[i] == true) }},
		"yes-no TRUE":      {Outcome{Measure: AsYesNo, Column: "lost", Success: "TRUE"}, "[false true]", func(i int) float64 { return is(cellsOf(cols, "lost")[i] == true) }},
		"yes-no 0":         {Outcome{Measure: AsYesNo, Column: "settled", Success: "0"}, "[1 0]", func(i int) float64 { return is(cellsOf(cols, "settled")[i] == 0) }},
		"yes-no 1.0":       {Outcome{Measure: AsYesNo, Column: "settled", Success: "1.0"}, "[0 1]", func(i int) float64 { return is(cellsOf(cols, "settled")[i] == 1) }},
		"classes of text":  {Outcome{Measure: AsClasses, Column: "stage"}, "[pediveliger spat veliger]", func(i int) float64 { return map[any]float64{"spat": 1, "veliger": 2}[cellsOf(cols, "stage")[i]] }},
		"classes by size":  {Outcome{Measure: AsClasses, Column: "grade"}, "[2 3 10]", func(i int) float64 { return map[any]float64{3: 1, 10: 2}[cellsOf(cols, "grade")[i]] }},
		"classes of truth": {Outcome{Measure: AsClasses, Column: "lost"}, "[false true]", func(i int) float64 { return is(cellsOf(cols, "lost")[i] == true) }},
	} {
		t.Run(name, func(t *testing.T) {
			prints := map[string]bool{}
			for _, path := range paths {
				d := load(t, path, Request{Outcome: c.outcome, Candidates: []string{"ph"}})
				prints[d.Fingerprint] = true
				if fmt.Sprint(d.Classes) != c.classes || len(d.Outcome) != 12 || d.Survival != nil {
					t.Fatalf("%s: classes %v, want %s; %d values", filepath.Base(path), d.Classes, c.classes, len(d.Outcome))
				}
				for i, y := range d.Outcome {
					if y != c.value(i) {
						t.Errorf("%s: row %d is %v, want %v", filepath.Base(path), i, y, c.value(i))
					}
				}
			}
			if len(prints) != 1 {
				t.Errorf("%d fingerprints in three formats", len(prints))
			}
		})
	}
}

func is(b bool) float64 {
	if b {
		return 1
	}
	return 0
}

func TestSurvival(t *testing.T) {
	cols := larvae()
	events := testColumn{"end", arrow.BinaryTypes.String, nil}
	for _, c := range cellsOf(cols, "settled") {
		events.cells = append(events.cells, pick(c == 1, any("settled"), any("censored")))
	}
	cols = append(cols, events)
	for _, path := range inEveryFormat(t, cols) {
		for _, o := range []Outcome{
			{Measure: AsSurvival, Time: "days", Event: "settled", Entry: "joined", Strata: []string{"site", "grade"}},
			{Measure: AsSurvival, Time: "days", Event: "settled", Success: "1", Entry: "joined", Strata: []string{"site", "grade"}},
			{Measure: AsSurvival, Time: "days", Event: "end", Success: "settled", Entry: "joined", Strata: []string{"site", "grade"}},
		} {
			d := load(t, path, Request{Outcome: o, Candidates: []string{"ph"}, Within: []string{"outcome", "site"}, Weight: "w"})
			s := d.Survival
			if s == nil || d.Outcome != nil || d.Classes != nil || len(d.Rows) != 11 {
				t.Fatalf("%s: no survival, or others too", path)
			}
			pairs := map[[2]any]int32{}
			for k, i := range d.Rows {
				if s.Time[k] != cellsOf(cols, "days")[i] || s.Entry[k] != cellsOf(cols, "joined")[i] || s.Event[k] != (cellsOf(cols, "settled")[i] == 1) {
					t.Errorf("%s: row %d is %v %v %v", path, i, s.Time[k], s.Entry[k], s.Event[k])
				}
				pair := [2]any{cellsOf(cols, "site")[i], cellsOf(cols, "grade")[i]}
				if was, met := pairs[pair]; met && was != s.Stratum[k] {
					t.Errorf("%v has the strata %d and %d", pair, was, s.Stratum[k])
				}
				pairs[pair] = s.Stratum[k]
				if want := fmt.Sprintf("outcome=%s, site=%s", pick(s.Event[k], "event", "no event"), cellsOf(cols, "site")[i]); d.WithinLevels[d.Within[k]] != want {
					t.Errorf("row %d is drawn within %s, want %s", i, d.WithinLevels[d.Within[k]], want)
				}
			}
			distinct := map[int32]bool{}
			for _, k := range pairs {
				distinct[k] = true
			}
			if len(distinct) != len(pairs) {
				t.Errorf("%d strata for %d pairs of levels", len(distinct), len(pairs))
			}
		}
	}
	d := load(t, inEveryFormat(t, cols)[0], Request{Outcome: Outcome{Measure: AsSurvival, Time: "days", Event: "lost"}, Candidates: []string{"ph"}})
	if d.Survival.Entry != nil || d.Survival.Stratum != nil || !d.Survival.Event[0] || d.Survival.Event[1] {
		t.Errorf("without entry and strata: %+v", d.Survival)
	}
}

func TestOffsetAndExposure(t *testing.T) {
	cols := larvae()
	for _, path := range inEveryFormat(t, cols) {
		d := load(t, path, Request{Outcome: Outcome{Measure: AsCount, Column: "spat_count", Offset: "shift", Exposure: "litres"}, Candidates: []string{"ph"}})
		for i, o := range d.Offset {
			want := cellsOf(cols, "shift")[i].(float64) + math.Log(cellsOf(cols, "litres")[i].(float64))
			if !scalar.EqualWithinULP(o, want, 2) {
				t.Errorf("row %d: offset %v, want %v", i, o, want)
			}
		}
		d = load(t, path, Request{Outcome: Outcome{Column: "days", Offset: "shift"}, Candidates: []string{"ph"}, Weight: "w"})
		if len(d.Offset) != 11 || d.Offset[10] != 2 || d.Offset[0] != 0.5 {
			t.Errorf("offsets %v", d.Offset)
		}
	}
}

// The logarithm is within an ulp of the exact one (atanh series, 200 bits).
func TestLogarithm(t *testing.T) {
	r := rand.New(rand.NewPCG(17, 18))
	values := []float64{1, 2, 0.5, math.E, 10, 1e-300, 1e300, 5e-324, math.MaxFloat64, math.Nextafter(1, 2), math.Nextafter(1, 0), math.Sqrt2, math.Sqrt2 / 2, 0.99, 1.01}
	for range 400 {
		values = append(values, math.Exp(20*r.NormFloat64()), 1+r.NormFloat64()/1e4)
	}
	worst := 0.0
	for _, x := range values {
		if x <= 0 {
			continue
		}
		want := exactLog(x)
		got := logarithm(x)
		if want.Sign() == 0 {
			if got != 0 {
				t.Errorf("log 1 is %v", got)
			}
			continue
		}
		f, _ := want.Float64()
		unit := math.Abs(math.Nextafter(f, math.Inf(1)) - f)
		diff, _ := new(big.Float).Sub(new(big.Float).SetFloat64(got), want).Float64()
		worst = max(worst, math.Abs(diff)/unit)
	}
	if t.Logf("off by %.2f units in the last place", worst); worst > 0.75 {
		t.Errorf("the logarithm is off by %.2f units in the last place", worst)
	}
	// Pinned bits: another machine must have the same.
	if got := math.Float64bits(logarithm(3.7)); got != math.Float64bits(1.308332819650179) {
		t.Errorf("log 3.7 has the bits %x", got)
	}
}

// exactLog is the natural logarithm with 200 bits.
func exactLog(x float64) *big.Float {
	num := func() *big.Float { return new(big.Float).SetPrec(200) }
	series := func(s *big.Float) *big.Float { // 2 artanh s
		sum, power, square := num(), num().Set(s), num().Mul(s, s)
		for k := int64(1); k < 200; k += 2 {
			sum.Add(sum, num().Quo(power, num().SetInt64(k)))
			power.Mul(power, square)
		}
		return sum.Mul(sum, num().SetInt64(2))
	}
	mantissa, exponent := num(), 0
	exponent = num().SetFloat64(x).MantExp(mantissa)
	one := num().SetInt64(1)
	s := num().Quo(num().Sub(mantissa, one), num().Add(mantissa, one))
	ln2 := series(num().Quo(one, num().SetInt64(3)))
	return num().Add(series(s), ln2.Mul(ln2, num().SetInt64(int64(exponent))))
}

func TestOutcomesThatCannotBe(t *testing.T) {
	base := larvae()
	change := func(name string, row int, v any) []testColumn {
		out := slices.Clone(base)
		for k := range out {
			if out[k].name == name {
				out[k].cells = slices.Clone(out[k].cells)
				out[k].cells[row] = v
			}
		}
		return out
	}
	fractions := append(slices.Clone(base), testColumn{"half", arrow.PrimitiveTypes.Float64, nil}, testColumn{"ids", arrow.BinaryTypes.String, nil})
	for i := range 12 {
		fractions[len(base)].cells = append(fractions[len(base)].cells, 0.5*float64(i%3))
		fractions[len(base)+1].cells = append(fractions[len(base)+1].cells, fmt.Sprint("tank ", i))
	}
	survival := Outcome{Measure: AsSurvival, Time: "days", Event: "settled", Entry: "joined"}
	for name, c := range map[string]struct {
		cols    []testColumn
		outcome Outcome
		want    []string
	}{
		"three values":     {base, Outcome{Measure: AsYesNo, Column: "stage", Success: "spat"}, []string{`column "stage": holds 3 values, and an outcome of kind yes-no has two`, `"pediveliger" (2 rows), "spat" (6 rows), "veliger" (4 rows)`, `kind = "classes"`}},
		"no such success":  {base, Outcome{Measure: AsYesNo, Column: "fate", Success: "Alive"}, []string{`no row holds the success "Alive"; it holds "alive" (7 rows), "dead" (5 rows): write success = "alive" or success = "dead" in [outcome], whichever is the success`}},
		"which success":    {base, Outcome{Measure: AsYesNo, Column: "fate"}, []string{`which value is the success? It holds "alive" (7 rows), "dead" (5 rows): write success = "alive" or success = "dead"`}},
		"negative count":   {change("spat_count", 4, -1), Outcome{Measure: AsCount, Column: "spat_count"}, []string{`column "spat_count": is no count in row 4 (rows are counted from 0) (the first holds -1)`}},
		"half a count":     {base, Outcome{Measure: AsCount, Column: "days"}, []string{`column "days": is no count in rows 0, 6`, "the first holds 18.5"}},
		"count is missing": {change("spat_count", 4, nil), Outcome{Measure: AsCount, Column: "spat_count"}, []string{`the outcome is missing in row 4`}},
		"class is missing": {change("stage", 7, nil), Outcome{Measure: AsClasses, Column: "stage"}, []string{`column "stage": the outcome is missing in row 7`, "never filled"}},
		"classes of halves": {fractions, Outcome{Measure: AsClasses, Column: "half"},
			[]string{`column "half": cannot be an outcome of kind classes: row 1 holds 0.5, and only text, truth values and whole numbers are levels`}},
		"count of text":      {base, Outcome{Measure: AsCount, Column: "stage"}, []string{`column "stage": cannot be the outcome: is text, and a number is needed (kind = "yes-no" and kind = "classes" read text)`}},
		"time 0":             {change("days", 2, 0.0), survival, []string{`column "days": the time is 0 or negative in row 2 (rows are counted from 0) (the first holds 0)`}},
		"late entry":         {change("joined", 2, 14.0), survival, []string{`column "joined": the entry is not before the time in row 2`, "(the first enters at 14 and ends at 14)"}},
		"entry is missing":   {change("joined", 2, nil), survival, []string{`column "joined": the entry is missing in row 2`}},
		"odd status":         {change("settled", 5, 2), survival, []string{`column "settled": holds "2" in row 5`, "the event status is 1 or true"}},
		"status of words":    {base, Outcome{Measure: AsSurvival, Time: "days", Event: "fate"}, []string{`column "fate": holds "alive" in rows `, `; it holds "alive" (7 rows), "dead" (5 rows): write success = "alive" or success = "dead" in [outcome], whichever is the event`}},
		"status is missing":  {change("settled", 5, nil), survival, []string{`column "settled": the event status is missing in row 5`}},
		"no event":           {base, Outcome{Measure: AsSurvival, Time: "days", Event: "settled", Success: "3"}, []string{`column "settled": no row holds the event "3"; it holds "0" (`, `), "1" (`, `write success = "0" or success = "1" in [outcome], whichever is the event`}},
		"stratum is missing": {change("site", 1, nil), Outcome{Measure: AsSurvival, Time: "days", Event: "settled", Strata: []string{"site"}}, []string{`column "site": the stratum is missing in row 1`}},
		"exposure 0":         {change("litres", 3, 0.0), Outcome{Measure: AsCount, Column: "spat_count", Exposure: "litres"}, []string{`column "litres": the exposure is 0 or negative in row 3`}},
		"offset is missing":  {change("shift", 3, nil), Outcome{Measure: AsCount, Column: "spat_count", Offset: "shift"}, []string{`column "shift": the offset is missing in row 3`}},
		"both":               {base, Outcome{Column: "days", Time: "days", Event: "settled"}, []string{"belong to an outcome of kind survival, not number"}},
		"no event column":    {base, Outcome{Measure: AsSurvival, Time: "days"}, []string{"has a time and an event status"}},
		"no column":          {base, Outcome{Measure: AsCount}, []string{"an outcome of kind count needs its columns"}},
		"exposure of number": {base, Outcome{Column: "days", Exposure: "litres"}, []string{"an exposure belongs to an outcome of kind count, not number"}},
		"offset of classes":  {base, Outcome{Measure: AsClasses, Column: "stage", Offset: "shift"}, []string{"kind classes has no offset"}},
		"column twice":       {base, Outcome{Measure: AsSurvival, Time: "days", Event: "days"}, []string{`column "days": cannot be the time and the event status at once`}},
		"all the same":       {change("w", 3, 1.0), Outcome{Measure: AsClasses, Column: "constant"}, []string{`no column called "constant"`}},
	} {
		t.Run(name, func(t *testing.T) {
			for _, path := range inEveryFormat(t, c.cols) {
				_, err := tryLoad(t, path, Request{Outcome: c.outcome, Candidates: []string{"ph"}})
				wantError(t, err, c.want...)
			}
		})
	}
}

// Rows without class, event status, time, entry, exposure or stratum are
// dropped where that was asked for, and the rest is read as if they had never
// been there.
func TestDropRowsOfOutcomes(t *testing.T) {
	survival := Outcome{Measure: AsSurvival, Time: "days", Event: "settled", Entry: "joined", Strata: []string{"site"}}
	for name, o := range map[string]Outcome{
		"fate":    {Measure: AsYesNo, Column: "fate", Success: "alive"},
		"stage":   {Measure: AsClasses, Column: "stage"},
		"litres":  {Measure: AsCount, Column: "spat_count", Exposure: "litres"},
		"settled": survival, "days": survival, "joined": survival, "site": survival,
	} {
		with, without := larvae(), larvae()
		for k := range with {
			if with[k].name == name {
				with[k].cells = slices.Clone(with[k].cells)
				with[k].cells[3] = nil
			}
			without[k].cells = slices.Delete(slices.Clone(without[k].cells), 3, 4)
		}
		r := Request{Outcome: o, Candidates: []string{"ph"}, Missing: DropRows}
		plain := load(t, inEveryFormat(t, without)[0], r)
		for _, path := range inEveryFormat(t, with) {
			d := load(t, path, r)
			if len(d.Rows) != 11 || slices.Contains(d.Rows, 3) || !strings.Contains(fmt.Sprint(d.Notes), fmt.Sprintf("%q (1 missing)", name)) {
				t.Errorf("%s: rows %v, notes %q", name, d.Rows, d.Notes)
			}
			if !slices.Equal(d.Outcome, plain.Outcome) || !slices.Equal(d.Offset, plain.Offset) || !reflect.DeepEqual(d.Survival, plain.Survival) || d.Centre[0] != plain.Centre[0] {
				t.Errorf("%s: %v, want %v", name, d, plain)
			}
		}
	}
}

// An outcome without variation is refused; it may lose it with rows of weight 0.
func TestOutcomesWithoutVariation(t *testing.T) {
	text := "fate,n,stage,t,e,w,x\nalive,0,spat,1,0,1,1\nalive,0,spat,2,0,1,2\nalive,0,spat,3,0,1,4\ndead,1,veliger,4,1,0,3\n"
	path := writeText(t, tempFile(t, "t.csv"), text)
	for want, o := range map[string]Outcome{
		`column "fate": holds one value, "alive" (3 rows)`:   {Measure: AsYesNo, Column: "fate", Success: "alive"},
		`column "stage": holds one class, "spat" (3 rows)`:   {Measure: AsClasses, Column: "stage"},
		`column "n": all counts are 0`:                       {Measure: AsCount, Column: "n"},
		`column "e": no row has the event: there is nothing`: {Measure: AsSurvival, Time: "t", Event: "e"},
	} {
		_, err := tryLoad(t, path, Request{Outcome: o, Candidates: []string{"x"}, Weight: "w"})
		wantError(t, err, want)
		if _, err := tryLoad(t, path, Request{Outcome: o, Candidates: []string{"x"}}); err != nil {
			t.Errorf("with all rows: %v", err)
		}
	}
}

func TestClassesAreAtMostFifty(t *testing.T) {
	for _, most := range []int{MostLevels, MostLevels + 1} {
		var b strings.Builder
		b.WriteString("stage,grade,x\n")
		for i := range 3 * most {
			fmt.Fprintf(&b, "stage %d,%d,%d\n", i%most, i%most, i)
		}
		for _, column := range []string{"stage", "grade"} {
			d, err := tryLoad(t, writeText(t, tempFile(t, "t.csv"), b.String()), Request{Outcome: Outcome{Measure: AsClasses, Column: column}, Candidates: []string{"x"}})
			if most > MostLevels {
				wantError(t, err, "cannot be an outcome of kind classes: has more than 50 levels")
				continue
			}
			must(t, err)
			if len(d.Classes) != most || column == "grade" && d.Classes[10] != "10" {
				t.Errorf("%d classes: %v", len(d.Classes), d.Classes)
			}
		}
	}
}
