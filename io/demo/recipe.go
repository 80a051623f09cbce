package demo

import (
	"fmt"
	"math"
	"slices"
	"time"
)

// Rows is the number of batches in the table.
const Rows = 240

// Outcome is the column that the study is about: larvae alive at day 21, in
// percent.
const Outcome = "survival_d21"

// effect is a column that matters, with the change that one standard deviation
// of it makes.
type effect struct {
	column string
	size   float64
}

// ofSurvival lists the twelve in table order; sizes are percent points.
var ofSurvival = []effect{
	{"temperature_d05", 3.4},
	{"salinity_d07", -3.6},
	{"ph_d03", 3.2},
	{"oxygen_d09", 3.0},
	{"ammonia_d11", -3.4},
	{"isochrysis_d07", 3.2},
	{"chaetoceros_d13", 1.6},
	{"egg_diameter", 2.4},
	{"larval_density_d01", -3.0},
	{"otu_0087", -3.4},
	{"otu_0412", 3.4},
	{"otu_0733", -2.2},
}

const (
	meanSurvival = 54.0 // percent
	noisePoints  = 4.5  // standard deviation of what no column explains, percent points
)

// Matter returns the names of the twelve columns that matter, in table order.
func Matter() []string {
	return columnsOf(ofSurvival)
}

// series is a quantity measured on every sampling day.
type series struct {
	name           string
	centre, spread float64
	decimals       int
	memory         float64 // correlation with the sampling day before
}

var water = []series{
	{"temperature", 23.5, 1.1, 2, 0.7},
	{"salinity", 27.0, 1.8, 2, 0.7},
	{"ph", 8.05, 0.12, 3, 0.6},
	{"alkalinity", 2.2, 0.15, 3, 0.7},
	{"oxygen", 7.4, 0.5, 2, 0.6},
	{"ammonia", 0.11, 0.03, 4, 0.6},
	{"nitrite", 0.05, 0.012, 4, 0.6},
	{"nitrate", 0.9, 0.2, 3, 0.7},
	{"phosphate", 0.08, 0.02, 4, 0.6},
	{"silicate", 1.4, 0.3, 3, 0.6},
	{"calcium", 340, 18, 1, 0.7},
	{"turbidity", 2.6, 0.7, 2, 0.5},
	{"chlorophyll", 3.1, 0.8, 2, 0.5},
}

var feed = []series{
	{"isochrysis", 42, 7, 1, 0.5},
	{"chaetoceros", 36, 6, 1, 0.5},
	{"pavlova", 21, 4, 1, 0.5},
	{"tetraselmis", 12, 3, 1, 0.5},
	{"nannochloropsis", 8, 2, 1, 0.5},
}

// days are the sampling days of every series.
var days = []int{1, 3, 5, 7, 9, 11, 13, 15, 17, 19}

var spawning = []series{
	{"brood_weight", 84, 9, 1, 0},
	{"brood_length", 96, 8, 1, 0},
	{"brood_condition", 3.2, 0.4, 2, 0},
	{"egg_diameter", 51, 2.2, 2, 0},
	{"egg_count", 6.1, 0.9, 2, 0},
	{"fertilised_share", 88, 4, 1, 0},
	{"hatched_share", 79, 6, 1, 0},
	{"larval_density_d01", 9.5, 1.4, 2, 0},
	{"larval_length_d03", 78, 3, 1, 0},
	{"aeration_rate", 2.4, 0.3, 2, 0},
	{"flow_rate", 5.1, 0.7, 2, 0},
	{"light_hours", 11.5, 1.2, 1, 0},
	{"screen_size", 63, 8, 0, 0},
	{"transfer_minutes", 34, 9, 0, 0},
	{"wash_volume", 18, 4, 1, 0},
	{"stocking_delay", 26, 5, 0, 0},
	{"filter_age", 41, 16, 0, 0},
	{"uv_dose", 38, 6, 1, 0},
}

const (
	taxa          = 996 // members of the microbiome panel
	communitySize = 12  // members that live together
	community     = 0.7 // correlation of a member with its community
	weather       = 0.3 // correlation of the first day of a series with what the water of a batch shares
)

// Table is an invented table.
type Table struct {
	rows    int
	columns []column
}

// column holds one column; exactly one of number, integer and text is set.
type column struct {
	name    string
	number  []float64
	integer []int64
	text    []string
}

// Make builds the table of the larvae from a seed.
func Make(seed uint64) *Table {
	t := &Table{rows: Rows}
	from := origin{seed: seed}
	t.addLabels(from)
	t.addSeries(from, water, days)
	t.addSeries(from, feed, days)
	t.addOnce(from, spawning)
	t.addMicrobiome(from)
	t.add(column{name: "tank_volume", number: scaled(make([]float64, Rows), 200, 0, 0, 0)})
	t.add(column{name: "conductivity_d07", number: t.conductivity()})
	t.add(column{name: Outcome, number: t.survival(from)})
	return t
}

// Names returns the column names in table order.
func (t *Table) Names() []string {
	names := make([]string, len(t.columns))
	for i, c := range t.columns {
		names[i] = c.name
	}
	return names
}

// Number returns a copy of a column of numbers, or nil if there is none of
// that name.
func (t *Table) Number(name string) []float64 {
	for _, c := range t.columns {
		if c.name == name {
			return slices.Clone(c.number)
		}
	}
	return nil
}

// Text returns a copy of a column of text, or nil if there is none of that
// name.
func (t *Table) Text(name string) []string {
	for _, c := range t.columns {
		if c.name == name {
			return slices.Clone(c.text)
		}
	}
	return nil
}

// Integer returns a copy of a column of whole numbers, or nil if there is none
// of that name.
func (t *Table) Integer(name string) []int64 {
	for _, c := range t.columns {
		if c.name == name {
			return slices.Clone(c.integer)
		}
	}
	return nil
}

func (t *Table) add(c column) { t.columns = append(t.columns, c) }

// addLabels adds the identifier, the row number and the date as text: what
// every real table has and no model should see.
func (t *Table) addLabels(from origin) {
	id, number, date := make([]string, Rows), make([]int64, Rows), make([]string, Rows)
	src := from.source("spawned_on")
	day := time.Date(2023, time.March, 6, 0, 0, 0, 0, time.UTC)
	for i := range Rows {
		id[i] = fmt.Sprintf("batch-%04d", 1001+i)
		number[i] = int64(i + 1)
		date[i] = day.Format(time.DateOnly)
		day = day.AddDate(0, 0, int(src.rng.Uint64()%3))
	}
	t.add(column{name: "batch_id", text: id})
	t.add(column{name: "row_no", integer: number})
	t.add(column{name: "spawned_on", text: date})
}

// addSeries adds quantities measured over days: each day remembers the day
// before, and the first days of all share a little of the batch's weather.
func (t *Table) addSeries(from origin, list []series, days []int) {
	shared := from.source("weather").normals(t.rows)
	for _, s := range list {
		src := from.source(s.name)
		z := mix(shared, src.normals(t.rows), weather)
		for i, d := range days {
			if i > 0 {
				z = mix(z, src.normals(t.rows), s.memory)
			}
			name := fmt.Sprintf("%s_d%02d", s.name, d)
			t.add(column{name: name, number: scaled(z, s.centre, s.spread, 0, s.decimals)})
		}
	}
}

// addOnce adds quantities that are measured once.
func (t *Table) addOnce(from origin, list []series) {
	for _, s := range list {
		t.add(column{name: s.name, number: scaled(from.source(s.name).normals(t.rows), s.centre, s.spread, 0, s.decimals)})
	}
}

// addMicrobiome adds the panel: log-ratio abundances, members of a community
// correlated among themselves.
func (t *Table) addMicrobiome(from origin) {
	var factor []float64
	for k := range taxa {
		if k%communitySize == 0 {
			factor = from.source(fmt.Sprintf("community_%03d", k/communitySize)).normals(Rows)
		}
		name := fmt.Sprintf("otu_%04d", k+1)
		z := mix(factor, from.source(name).normals(Rows), community)
		t.add(column{name: name, number: scaled(z, 0, 1.4, math.Inf(-1), 3)})
	}
}

// conductivity is the salinity of day 7 in other units: a copy up to shift
// and scale.
func (t *Table) conductivity() []float64 {
	v := t.Number("salinity_d07")
	for i, x := range v {
		v[i] = 2 + float64(1.5*x)
	}
	return v
}

// survival is what the twelve make of it, plus noise, in percent.
func (t *Table) survival(from origin) []float64 {
	z := from.source(Outcome).normals(Rows)
	v := make([]float64, Rows)
	for i := range v {
		v[i] = float64(noisePoints * z[i])
	}
	t.addEffects(v, ofSurvival)
	y := scaled(v, meanSurvival, 1, 0, 1)
	for i := range y {
		y[i] = min(y[i], 100)
	}
	return y
}

// addEffects adds effects of columns in units of their standard deviations.
func (t *Table) addEffects(v []float64, list []effect) {
	for _, e := range list {
		x := t.Number(e.column)
		mean, spread := moments(x)
		for i := range v {
			v[i] += float64(e.size * float64((x[i]-mean)/spread))
		}
	}
}

// moments returns the mean and the standard deviation (divisor n) of x.
func moments(x []float64) (mean, spread float64) {
	for _, v := range x {
		mean += v
	}
	mean /= float64(len(x))
	for _, v := range x {
		spread += float64((v - mean) * (v - mean))
	}
	return mean, math.Sqrt(spread / float64(len(x)))
}
