package rundir

import (
	"flag"
	"math"
	"math/rand/v2"
	"reflect"
	"slices"
	"testing"

	"holdfast/selection"
	"holdfast/solver"
)

// seed rebuilds every random test of this package.
var seed = flag.Uint64("seed", 20, "seed of the random tests")

func source(t testing.TB) *rand.Rand {
	t.Logf("seed %d", *seed)
	return rand.New(rand.NewPCG(*seed, 8))
}

// hatcheryNames are the candidates of the invented run that the tests keep.
var hatcheryNames = []string{"salinity", "ph", "alkalinity", "larvae_per_ml", "algae \"T-iso\"", "rel. Häufigkeit, Vibrio"}

func hatcheryIdentity() Identity {
	return Identity{
		Fingerprint: "5e1f", Outcome: "survival_d21", Kind: "number",
		Candidates: hatcheryNames, Always: []string{"tank_volume", "spawn_day"}, Missing: "refuse",
		Penalty: Penalty{Mix: 1, Scale: "draw", Ratio: 0.95, Floor: 0.005, StopAfter: 12, Relative: map[string]float64{"ph": 0.5}},
		Draws:   Draws{Design: "halves", Seed: 1},
	}
}

func hatcheryMeta(number int) Meta {
	return Meta{
		Tool: "holdfast 0.1", Kernel: "portable", TableRows: 240, Rows: 238, Number: number,
		LambdaMax: 0.1 + 0.2, LastStep: 20,
		Centre:    []float64{31.5, 8.1, 2.2, 12, 0.1, 1e-3, 900, 4},
		Deviation: []float64{1.5, 0.1, 0.2, 3, 0.05, 1e-4, 20, 1},
		Excluded:  []Excluded{{Column: "pump", Reason: "constant"}, {Column: "salinity_psu", Reason: "copy", Of: "salinity"}},
	}
}

func hatcheryDecision() selection.Decision {
	v := 0.8125
	return selection.Decision{Region: selection.Cap, Bound: selection.Unimodal, Threshold: 0.8, Selected: 3, FalseSelections: &v, SelectedAsked: 3.7}
}

// hatcheryRun creates a decided run directory without draws.
func hatcheryRun(t testing.TB, number int) *Dir {
	t.Helper()
	d, err := Create(t.TempDir(), hatcheryIdentity(), []byte("[table]\npath = \"hatchery.parquet\"\n"), hatcheryMeta(number))
	if err != nil {
		t.Fatal(err)
	}
	if err := d.SetDecision(hatcheryDecision()); err != nil {
		t.Fatal(err)
	}
	return d
}

// odd are values whose bits a careless format loses.
var odd = []float64{math.Copysign(0, -1), math.Inf(1), math.Inf(-1), math.NaN(), math.Float64frombits(0x7ff8000000000123),
	math.SmallestNonzeroFloat64, math.MaxFloat64, 0.1 + 0.2}

func value(r *rand.Rand) float64 {
	if r.IntN(4) == 0 {
		return odd[r.IntN(len(odd))]
	}
	return r.NormFloat64()
}

// upTo lists the numbers first to last-1.
func upTo(first, last int) []int {
	var list []int
	for d := first; d < last; d++ {
		list = append(list, d)
	}
	return list
}

func randomPaths(r *rand.Rand, n int) []solver.Path { return forms["number"].randomPaths(r, n) }

// sameBits compares paths field by field, floats by their bits. It shares
// nothing with the digest, which is under test too.
func sameBits(a, b solver.Path) bool {
	bits := func(list []float64) []uint64 {
		out := make([]uint64, len(list))
		for i, v := range list {
			out[i] = math.Float64bits(v)
		}
		return out
	}
	value := func(list []solver.Coef) []float64 {
		out := make([]float64, len(list))
		for i, c := range list {
			out[i] = c.Value
		}
		return out
	}
	place := func(list []solver.Coef) []int32 {
		var out []int32
		for _, c := range list {
			out = append(out, c.Step, c.Candidate, c.Term, c.Class)
		}
		return out
	}
	return a.First == b.First && a.Last == b.Last && a.Stop == b.Stop && a.Why == b.Why &&
		a.Borderline == b.Borderline && a.Twins == b.Twins && a.Redraws == b.Redraws &&
		slices.Equal(bits([]float64{a.Violation, a.Gap, a.NullDeviance}), bits([]float64{b.Violation, b.Gap, b.NullDeviance})) &&
		slices.Equal(bits(a.Deviance), bits(b.Deviance)) &&
		slices.Equal(a.Entries, b.Entries) && slices.Equal(a.Still, b.Still) &&
		slices.Equal(place(a.Coefs), place(b.Coefs)) && slices.Equal(bits(value(a.Coefs)), bits(value(b.Coefs))) &&
		slices.Equal(bits(a.Intercepts), bits(b.Intercepts)) && slices.Equal(bits(a.Always), bits(b.Always))
}

func TestRunIsReadBackAsWritten(t *testing.T) {
	d := hatcheryRun(t, 40)
	again, err := Open(d.Path())
	if err != nil {
		t.Fatal(err)
	}
	if got, want := again.Run(), d.Run(); !reflect.DeepEqual(got, want) {
		t.Errorf("read back\n%+v\nwritten\n%+v", got, want)
	}
	study, err := again.Study()
	if err != nil || string(study) != "[table]\npath = \"hatchery.parquet\"\n" {
		t.Errorf("study.toml: %q, %v", study, err)
	}
}

// DESIGN 6: everything in the identity, and nothing else, tells runs apart.
func TestIdentityDigest(t *testing.T) {
	base := hatcheryIdentity().Digest()
	if base != hatcheryIdentity().Digest() {
		t.Fatal("equal identities have different digests")
	}
	changes := map[string]func(*Identity){
		"fingerprint": func(i *Identity) { i.Fingerprint = "5e20" },
		"outcome":     func(i *Identity) { i.Outcome = "survival_d14" },
		"kind":        func(i *Identity) { i.Kind = "yes-no" },
		"candidates":  func(i *Identity) { i.Candidates = hatcheryNames[1:] },
		"order":       func(i *Identity) { i.Candidates = []string{"ph", "salinity"} },
		"always":      func(i *Identity) { i.Always = nil },
		"missing":     func(i *Identity) { i.Missing = "fill-mean" },
		"weight":      func(i *Identity) { i.CaseWeight = "w" },
		"mix":         func(i *Identity) { i.Penalty.Mix = 0.5 },
		"scale":       func(i *Identity) { i.Penalty.Scale = "none" },
		"relative":    func(i *Identity) { i.Penalty.Relative = map[string]float64{"ph": 0.25} },
		"ratio":       func(i *Identity) { i.Penalty.Ratio = math.Nextafter(0.95, 1) },
		"floor":       func(i *Identity) { i.Penalty.Floor = 0.01 },
		"stop_after":  func(i *Identity) { i.Penalty.StopAfter = 13 },
		"jitter":      func(i *Identity) { i.Penalty.Jitter = 0.5 },
		"group":       func(i *Identity) { i.Penalty.GroupWeight = "sqrt" },
		"luck":        func(i *Identity) { i.Penalty.Luck = 0.1 },
		"success":     func(i *Identity) { i.Success = "settled" },
		"classes":     func(i *Identity) { i.Classes = []string{"a", "b"} },
		"class order": func(i *Identity) { i.Classes = []string{"b", "a"} },
		"time":        func(i *Identity) { i.Time = "days" },
		"event":       func(i *Identity) { i.Event = "days" },
		"entry":       func(i *Identity) { i.Entry = "days" },
		"strata":      func(i *Identity) { i.Strata = []string{"days"} },
		"ties":        func(i *Identity) { i.Ties = "days" },
		"offset":      func(i *Identity) { i.Offset = "days" },
		"exposure":    func(i *Identity) { i.Exposure = "days" },
		"terms":       func(i *Identity) { i.Terms = map[string][]string{"ph": {"ph=a"}} },
		"two terms":   func(i *Identity) { i.Terms = map[string][]string{"ph": {"ph=a", "ph=b"}} },
		"term order":  func(i *Identity) { i.Terms = map[string][]string{"ph": {"ph=b", "ph=a"}} },
		"reference":   func(i *Identity) { i.Reference = map[string]string{"ph": "ph=a"} },
		"within":      func(i *Identity) { i.Draws.Within = []string{"outcome"} },
		"design":      func(i *Identity) { i.Draws.Design = "bootstrap" },
		"seed":        func(i *Identity) { i.Draws.Seed = 2 },
	}
	seen := map[string]string{base: "nothing"}
	for name, change := range changes {
		id := hatcheryIdentity()
		change(&id)
		digest := id.Digest()
		if other, ok := seen[digest]; ok {
			t.Errorf("changing %s gives the digest of changing %s", name, other)
		}
		seen[digest] = name
	}
	plain := hatcheryIdentity()
	plain.Penalty.Jitter = 1
	if plain.Digest() != base {
		t.Error("a jitter of 1 is not none")
	}
}
