package demo

import (
	"fmt"
	"math"
)

// Batches is the number of rows of the second table.
const Batches = 600

// BatchesFile is the name under which the studies of Studies look for it.
const BatchesFile = "batches.parquet"

// lastDay is when watching ends: what has not settled by then is censored.
const lastDay = 35

// label is a column of text: its values, how frequent each is, and what each
// does to the two outcomes.
type label struct {
	name   string
	levels []string
	share  []float64 // of the rows; the last level takes the rest
	lost   []float64 // log odds of being lost; nil: none
	settle []float64 // log hazard of settling; nil: none
}

var labels = []label{
	{"site", []string{"bay", "cove", "lagoon", "sound"}, []float64{0.35, 0.25, 0.2}, []float64{0, 0.7, -0.5, 0.3}, []float64{0, 0.3, -0.2, 0.2}},
	{"feed_mix", []string{"algae", "mixed", "paste"}, []float64{0.4, 0.35}, nil, []float64{0, 0.5, -0.8}},
	{"tank_material", []string{"concrete", "fibreglass", "polyethylene"}, []float64{0.2, 0.5}, nil, nil},
}

// fewDays are the sampling days of the second table.
var fewDays = []int{1, 3, 5, 7, 9}

// plates are colony counts on agar, as decimal logarithms.
var plates = []series{
	{"vibrio", 3.1, 0.6, 2, 0.6},
	{"pseudomonas", 2.8, 0.5, 2, 0.6},
	{"alteromonas", 3.4, 0.5, 2, 0.6},
	{"flavobacteria", 3.0, 0.5, 2, 0.6},
	{"roseobacter", 3.6, 0.4, 2, 0.6},
	{"total_count", 5.2, 0.4, 2, 0.7},
}

// ofLoss lists what makes a batch be lost: log odds for one standard deviation.
var ofLoss = []effect{
	{"oxygen_d07", -0.9},
	{"ammonia_d05", 1.0},
	{"salinity_d03", -0.9},
	{"fertilised_share", -0.9},
	{"larval_density_d01", 0.25},
	{"vibrio_d07", 1.0},
}

// ofSettling lists what makes larvae settle early: log hazard for one standard
// deviation. The temperature of every day does a little.
var ofSettling = []effect{
	{"temperature_d01", 0.12},
	{"temperature_d03", 0.12},
	{"temperature_d05", 0.12},
	{"temperature_d07", 0.12},
	{"temperature_d09", 0.12},
	{"turbidity_d09", -0.45},
	{"isochrysis_d07", 0.4},
	{"egg_diameter", 0.15},
	{"larval_length_d03", 0.45},
}

const (
	baseLost     = -1.4 // log odds of being lost where everything is as usual
	settleScale  = 26.0 // days; of the Weibull law of the day of settling
	settleShape  = 5.0
	shareArrived = 0.3 // batches that come from elsewhere while they are watched
	firstArrival = 8
	arrivalDays  = 13 // days, from the first, on which batches arrive
)

// MakeBatches builds the second table from a seed: 600 batches with what
// became of them (fate), and the day on which they settled (settlement_day,
// settled).
func MakeBatches(seed uint64) *Table {
	t := &Table{rows: Batches}
	from := origin{seed: seed, table: "batches "}
	t.addBatchIDs()
	for _, l := range labels {
		t.add(column{name: l.name, text: l.draw(from, t.rows)})
	}
	t.addSeries(from, water, fewDays)
	t.addSeries(from, feed, fewDays)
	t.addSeries(from, plates, fewDays)
	t.addOnce(from, spawning)
	t.addFates(from)
	return t
}

// addBatchIDs adds an identifier.
func (t *Table) addBatchIDs() {
	id := make([]string, t.rows)
	for i := range id {
		id[i] = fmt.Sprintf("lot-%04d", 3001+i)
	}
	t.add(column{name: "batch_id", text: id})
}

// draw gives every row a level.
func (l label) draw(from origin, rows int) []string {
	src := from.source(l.name)
	v := make([]string, rows)
	for i := range v {
		u, k := src.uniform(), 0
		for k < len(l.share) && u >= l.share[k] {
			u -= l.share[k]
			k++
		}
		v[i] = l.levels[k]
	}
	return v
}

// addFates adds what happened: whether a batch was lost, from when and until
// when it was watched, and whether it had settled by then.
func (t *Table) addFates(from origin) {
	lost, settles := t.logOdds(), t.logHazard()
	src := from.source("fate")
	fate := make([]string, t.rows)
	arrival, day, settled := make([]int64, t.rows), make([]int64, t.rows), make([]int64, t.rows)
	for i := range fate {
		arrival[i] = src.arrival()
		end := int64(lastDay)
		fate[i] = "reared"
		if src.uniform() < 1/(1+math.Exp(-lost[i])) {
			fate[i] = "lost"
			end = arrival[i] + 1 + src.below(lastDay-arrival[i])
		}
		day[i], settled[i] = src.settlement(settles[i], arrival[i]), 1
		if day[i] > end {
			day[i], settled[i] = end, 0
		}
	}
	t.add(column{name: "fate", text: fate})
	t.add(column{name: "arrival_day", integer: arrival})
	t.add(column{name: "settlement_day", integer: day})
	t.add(column{name: "settled", integer: settled})
}

// arrival is the day from which a batch is watched: 0, or the day on which it
// came from elsewhere.
func (s source) arrival() int64 {
	if s.uniform() >= shareArrived {
		return 0
	}
	return firstArrival + s.below(arrivalDays)
}

// settlement is the day, begun days counted, on which a batch settles that has
// not settled by the day of its arrival: a Weibull law with hazards in
// proportion to exp(logHazard), by inversion of its cumulative hazard from the
// arrival on (Bender, Augustin & Blettner 2005, Stat. Med. 24:1713-1723, with
// the truncation added).
func (s source) settlement(logHazard float64, arrival int64) int64 {
	waited := -math.Log(1-s.uniform()) / math.Exp(logHazard)
	before := math.Pow(float64(arrival)/settleScale, settleShape)
	return max(arrival+1, int64(math.Ceil(float64(settleScale*math.Pow(before+waited, 1/settleShape)))))
}

// logOdds is that of every batch to be lost.
func (t *Table) logOdds() []float64 {
	v := make([]float64, t.rows)
	for i := range v {
		v[i] = baseLost
	}
	t.addEffects(v, ofLoss)
	for _, l := range labels {
		t.addLevels(v, l, l.lost)
	}
	return v
}

// logHazard is that of every batch to settle, against a batch as usual.
func (t *Table) logHazard() []float64 {
	v := make([]float64, t.rows)
	t.addEffects(v, ofSettling)
	for _, l := range labels {
		t.addLevels(v, l, l.settle)
	}
	return v
}

// addLevels adds the effect of each row's level.
func (t *Table) addLevels(v []float64, l label, effects []float64) {
	if effects == nil {
		return
	}
	of := make(map[string]float64, len(effects))
	for k, level := range l.levels {
		of[level] = effects[k]
	}
	for i, level := range t.Text(l.name) {
		v[i] += of[level]
	}
}
