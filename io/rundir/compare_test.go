package rundir

import (
	"errors"
	"fmt"
	"maps"
	"math"
	"os"
	"reflect"
	"runtime"
	"strings"
	"testing"
	"time"
)

// DESIGN 6: whatever the identity holds, and version, architecture and parts,
// is refused with old and new value side by side, in the study's words.
func TestCompareNamesEveryChange(t *testing.T) {
	cases := []struct {
		change        func(*Identity, *Meta)
		key, old, now string
	}{
		{func(i *Identity, m *Meta) { i.Fingerprint = "5e20" }, "table (fingerprint of the values that are fitted)", "5e1f", "5e20"},
		{func(i *Identity, m *Meta) { i.Outcome = "survival_d14" }, "outcome.column", "survival_d21", "survival_d14"},
		{func(i *Identity, m *Meta) { i.Kind = "yes-no" }, "outcome.kind", "number", "yes-no"},
		{func(i *Identity, m *Meta) { i.CaseWeight = "larvae" }, "outcome.case_weight", "not set", "larvae"},
		{func(i *Identity, m *Meta) { i.Missing = "fill-mean" }, "table.missing", "refuse", "fill-mean"},
		{func(i *Identity, m *Meta) { i.Candidates = append([]string{"silicate"}, hatcheryNames[1:]...) }, "candidates", "6 columns, among them salinity", "6 columns, among them silicate"},
		{func(i *Identity, m *Meta) { i.Candidates = hatcheryNames[1:] }, "candidates", "6 columns, among them salinity", "5 columns"},
		{func(i *Identity, m *Meta) { i.Always = []string{"spawn_day", "tank_volume"} }, "candidates.always", "2 columns", "2 columns in another order"},
		{func(i *Identity, m *Meta) { i.Always = nil }, "candidates.always", "2 columns, among them tank_volume, spawn_day", "0 columns"},
		{func(i *Identity, m *Meta) { i.Penalty.Mix = 0.5 }, "penalty.mix", "1", "0.5"},
		{func(i *Identity, m *Meta) { i.Penalty.Scale = "none" }, "penalty.scale", "draw", "none"},
		{func(i *Identity, m *Meta) { i.Penalty.Relative = map[string]float64{"ph": 0.25} }, "penalty.relative.ph", "0.5", "0.25"},
		{func(i *Identity, m *Meta) { i.Penalty.Relative = nil }, "penalty.relative.ph", "0.5", "not set"},
		{func(i *Identity, m *Meta) { i.Penalty.Jitter = 0.5 }, "penalty.jitter", "1", "0.5"},
		{func(i *Identity, m *Meta) { i.Penalty.Ratio = math.Nextafter(0.95, 1) }, "penalty.ratio", "0.95", "0.9500000000000001"},
		{func(i *Identity, m *Meta) { i.Penalty.Floor = 0.01 }, "penalty.floor", "0.005", "0.01"},
		{func(i *Identity, m *Meta) { i.Penalty.StopAfter = 13 }, "penalty.stop_after", "12", "13"},
		{func(i *Identity, m *Meta) { i.Draws.Design = "bootstrap" }, "draws.design", "halves", "bootstrap"},
		{func(i *Identity, m *Meta) { i.Draws.Seed = math.MaxUint64 }, "draws.seed", "1", "18446744073709551615"},
		{func(i *Identity, m *Meta) { m.Tool = "v1.0.1 3ac1" }, "version of the program", "holdfast 0.1", "v1.0.1 3ac1"},
		{func(i *Identity, m *Meta) { m.Architecture = "riscv64" }, "architecture", runtime.GOARCH, "riscv64"},
		{func(i *Identity, m *Meta) { m.Parts = 3 }, "parts", "1", "3"},
		{func(i *Identity, m *Meta) { m.LambdaMax = math.Nextafter(0.3, 0) }, "lambda_max", "0.3", "0.29999999999999993"},
		{func(i *Identity, m *Meta) { m.LastStep = 21 }, "last step", "20", "21"},
	}
	d := hatcheryRun(t, 4)
	for _, c := range cases {
		id, meta := hatcheryIdentity(), hatcheryMeta(4)
		c.change(&id, &meta)
		checkChange(t, d, id, meta, Change{c.key, c.old, c.now})
	}
	for name, change := range map[string]func(*Identity, *Meta){
		"nothing":           func(*Identity, *Meta) {},
		"more draws":        func(_ *Identity, m *Meta) { m.Number = 400 },
		"another kernel":    func(_ *Identity, m *Meta) { m.Kernel = "avx512" },
		"a later minor":     func(_ *Identity, m *Meta) { m.Tool = "v0.9.1 77aa+dirty" },
		"a checkout":        func(_ *Identity, m *Meta) { m.Tool = "(devel)" },
		"parts as they are": func(_ *Identity, m *Meta) { m.Parts = 1 },
	} {
		id, meta := hatcheryIdentity(), hatcheryMeta(4)
		change(&id, &meta)
		if err := d.Compare(id, meta); err != nil {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// checkChange checks that one change is named, and how.
func checkChange(t *testing.T, d *Dir, id Identity, meta Meta, want Change) {
	t.Helper()
	err := d.Compare(id, meta)
	var m *Mismatch
	if !errors.As(err, &m) {
		t.Errorf("%s: %v", want.Key, err)
		return
	}
	if !reflect.DeepEqual(m.Changes, []Change{want}) {
		t.Errorf("%s: %+v, want %+v", want.Key, m.Changes, want)
	}
	if line := fmt.Sprintf("\n  %s: %s, now %s", want.Key, want.Old, want.New); !strings.HasSuffix(err.Error(), line) || !strings.Contains(err.Error(), d.Path()) {
		t.Errorf("%s: it says %q", want.Key, err)
	}
}

// The same for what only some kinds of outcome have, and for groups and
// categories; two directories that are to be read together are refused alike.
func TestCompareNamesEveryChangeOfAKind(t *testing.T) {
	terms := func(name string, columns ...string) func(*Identity) {
		return func(i *Identity) {
			i.Terms = maps.Clone(i.Terms)
			if i.Terms[name] = columns; columns == nil {
				delete(i.Terms, name)
			}
		}
	}
	cases := []struct {
		kind          string
		change        func(*Identity)
		key, old, now string
	}{
		{"yes-no", func(i *Identity) { i.Success = "kept" }, "outcome.success", "lost", "kept"},
		{"yes-no", func(i *Identity) { i.Draws.Within = nil }, "draws.within", "1 column, among them outcome", "0 columns"},
		{"yes-no", func(i *Identity) { i.Draws.Within = []string{"site"} }, "draws.within", "1 column, among them outcome", "1 column, among them site"},
		{"yes-no", func(i *Identity) { i.Offset = "log_larvae" }, "outcome.offset", "not set", "log_larvae"},
		{"yes-no", func(i *Identity) { i.Reference = map[string]string{"feed": "oats", "site": "arm", "pump": "false"} }, "candidates.reference.feed", "algae", "oats"},
		{"yes-no", terms("feed", "feed=oats", "feed=rye"), "columns of feed", "2 columns, among them feed=wheat", "2 columns, among them feed=rye"},
		{"yes-no", terms("sensors", "temp.1", "temp.2"), "columns of sensors", "3 columns, among them temp.3", "2 columns"},
		{"yes-no", terms("sensors", "temp.2", "temp.1", "temp.3"), "columns of sensors", "3 columns", "3 columns in another order"},
		{"yes-no", terms("site"), "columns of site", "3 columns, among them site=bay, site=cove, site=strait", "0 columns"},
		{"yes-no", terms("ph", "ph=low", "ph=high"), "columns of ph", "0 columns", "2 columns, among them ph=low, ph=high"},
		{"yes-no", func(i *Identity) { i.Penalty.GroupWeight = "sqrt" }, "penalty.group_weight", "even", "sqrt"},
		{"yes-no", func(i *Identity) { i.Penalty.Luck = 0.125 }, "chance of luck (selected over candidates when the run was made)", "0.1", "0.125"},
		{"yes-no", func(i *Identity) { i.Penalty.Jitter = 0 }, "penalty.jitter", "0.5", "1"},
		{"count", func(i *Identity) { i.Exposure = "" }, "outcome.exposure", "larvae", "not set"},
		{"classes", func(i *Identity) { i.Classes = []string{"half shell", "spat"} }, "classes of the outcome", "3 classes, among them shucked", "2 classes"},
		{"classes", func(i *Identity) { i.Classes = []string{"half shell", "spat", "shucked"} }, "classes of the outcome", "3 classes", "3 classes in another order"},
		{"survival", func(i *Identity) { i.Time = "weeks" }, "outcome.time", "days", "weeks"},
		{"survival", func(i *Identity) { i.Event = "dead" }, "outcome.event", "settled", "dead"},
		{"survival", func(i *Identity) { i.Entry = "" }, "outcome.entry", "from_day", "not set"},
		{"survival", func(i *Identity) { i.Strata = []string{"season", "site"} }, "outcome.strata", "1 column", "2 columns, among them site"},
		{"survival", func(i *Identity) { i.Success = "on shell" }, "outcome.success", "not set", "on shell"},
		{"survival", func(i *Identity) { i.Ties = "efron" }, "outcome.ties", "breslow", "efron"},
	}
	for _, c := range cases {
		id := kinds()[c.kind]
		d := runOf(t, id, 4)
		if err := d.Compare(id, metaOf(&id, 4)); err != nil {
			t.Errorf("%s, nothing changed: %v", c.kind, err)
		}
		meta := metaOf(&id, 4)
		c.change(&id)
		want := Change{c.key, c.old, c.now}
		checkChange(t, d, id, meta, want)
		var m *Mismatch
		_, err := Patience{}.OpenTogether([]string{d.Path(), runOf(t, id, 4).Path()})
		if !errors.As(err, &m) || !reflect.DeepEqual(m.Changes, []Change{want}) {
			t.Errorf("%s, of two directories: %v", c.key, err)
		}
	}
}

// Every member of the identity is compared, also one that is added later: no
// field may be changed without a change being named.
func TestCompareMissesNoField(t *testing.T) {
	seen := 0
	var walk func(v reflect.Value, path string, report func())
	walk = func(v reflect.Value, path string, report func()) {
		for k := range v.NumField() {
			f, name := v.Field(k), path+"."+v.Type().Field(k).Name
			old := reflect.ValueOf(f.Interface())
			if f.IsZero() {
				t.Fatalf("%s: everything() does not set it", name)
			}
			switch f.Kind() {
			case reflect.Struct:
				walk(f, name, report)
				continue
			case reflect.String:
				f.SetString(f.String() + "x")
			case reflect.Float64:
				f.SetFloat(f.Float() + 0.125)
			case reflect.Int:
				f.SetInt(f.Int() + 1)
			case reflect.Uint64:
				f.SetUint(f.Uint() + 1)
			case reflect.Bool:
				f.SetBool(!f.Bool())
			case reflect.Slice, reflect.Map:
				f.SetZero()
			default:
				t.Fatalf("%s: a kind that this test does not change", name)
			}
			seen++
			report()
			f.Set(old)
		}
	}
	id := everything()
	walk(reflect.ValueOf(&id).Elem(), "", func() {
		if changes := identityChanges(everything(), id); len(changes) != 1 {
			t.Errorf("%+v: changes %v", id, changes)
		}
	})
	if seen < 28 {
		t.Errorf("%d fields", seen)
	}
}

// everything is an identity with a value in every field. No run has all.
func everything() Identity {
	return Identity{
		Fingerprint: "5e1f", Kind: "number", Outcome: "survival_d21", Success: "lost", Classes: []string{"spat"},
		Time: "days", Event: "settled", Entry: "from_day", Strata: []string{"season"}, Ties: "efron",
		Offset: "log_larvae", Exposure: "larvae", CaseWeight: "weight",
		Candidates: []string{"feed", "ph"}, Always: []string{"site"},
		Terms: map[string][]string{"feed": {"feed=oats"}}, Reference: map[string]string{"feed": "algae"}, Missing: "refuse",
		Penalty: Penalty{Mix: 1, Scale: "draw", Relative: map[string]float64{"ph": 0.5}, GroupWeight: "even", Luck: 0.125, Jitter: 0.5,
			Ratio: 0.95, Floor: 0.005, StopAfter: 12},
		Draws: Draws{Design: "halves", Within: []string{"outcome"}, Seed: 1},
	}
}

// At most ten changes are named, and how many more there are.
func TestCompareNamesTen(t *testing.T) {
	id, meta := hatcheryIdentity(), hatcheryMeta(4)
	id.Penalty.Relative = map[string]float64{}
	for k := range 15 {
		id.Penalty.Relative[fmt.Sprintf("x%02d", k)] = 2
	}
	err := hatcheryRun(t, 4).Compare(id, meta)
	if err == nil || strings.Count(err.Error(), "\n") != 11 || !strings.HasSuffix(err.Error(), "\n  and 6 more") {
		t.Errorf("it says %v", err)
	}
	wide := func(prefix string) (list []string) {
		for k := range 12 {
			list = append(list, fmt.Sprint(prefix, k))
		}
		return list
	}
	c := listChange("candidates", wide("a"), wide("b"))
	if !strings.HasSuffix(c.Old, "a8, a9 and 2 more") || !strings.HasSuffix(c.New, "b8, b9 and 2 more") {
		t.Errorf("%+v", c)
	}
}

func TestExtend(t *testing.T) {
	d := hatcheryRun(t, 4)
	when := time.Date(2031, 5, 1, 8, 0, 0, 0, time.FixedZone("", 7200))
	for _, c := range []struct {
		number int
		says   string
	}{{2, "cannot be made smaller"}, {7, "take 8"}, {maxDraws + 2, "more than"}, {0, "smaller"}} {
		err := d.Extend(c.number, when)
		if err == nil || !strings.Contains(err.Error(), c.says) || c.number < 4 != errors.Is(err, ErrSmaller) {
			t.Errorf("to %d: %v", c.number, err)
		}
	}
	for _, number := range []int{4, 8, 8, 20} {
		if err := d.Extend(number, when); err != nil {
			t.Fatal(err)
		}
	}
	again, err := Open(d.Path())
	if err != nil {
		t.Fatal(err)
	}
	run := again.Run()
	want := []Extension{{"2031-05-01T06:00:00Z", 4, 8}, {"2031-05-01T06:00:00Z", 8, 20}}
	if run.Meta.Number != 20 || run.Asked() != 4 || !reflect.DeepEqual(run.Extensions, want) {
		t.Errorf("%d draws, asked for %d, extensions %v", run.Meta.Number, run.Asked(), run.Extensions)
	}
	// A run.json whose log does not fit its number was changed by hand.
	text, err := os.ReadFile(d.join(runFile))
	if err != nil {
		t.Fatal(err)
	}
	os.WriteFile(d.join(runFile), []byte(strings.Replace(string(text), `"to": 20`, `"to": 22`, 1)), 0o644)
	if _, err := Open(d.Path()); err == nil || !strings.Contains(err.Error(), "makes no sense") {
		t.Errorf("a log that does not fit: %v", err)
	}
	id := hatcheryIdentity()
	id.Draws.Design = "bootstrap"
	boot, err := Create(t.TempDir(), id, nil, hatcheryMeta(4))
	if err != nil {
		t.Fatal(err)
	}
	if err := boot.Extend(7, when); err != nil {
		t.Errorf("bootstrap draws need not be even: %v", err)
	}
}

func TestTidy(t *testing.T) {
	d := hatcheryRun(t, 4)
	names := []string{d.join(tempName(runFile)), d.join(drawsFolder, tempName(blockName(0))), d.join(partsFolder, tempName("0.json")), d.join(drawsFolder, "notes.txt")}
	young := d.join(drawsFolder, tempName(blockName(2)))
	for _, path := range append(names, young) {
		if err := os.WriteFile(path, nil, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	for _, path := range names {
		if err := os.Chtimes(path, time.Time{}, time.Now().Add(-2*time.Hour)); err != nil {
			t.Fatal(err)
		}
	}
	if n, err := d.Tidy(); n != 3 || err != nil {
		t.Errorf("%d removed, %v", n, err)
	}
	for _, path := range []string{young, names[3]} {
		if _, err := os.Stat(path); err != nil {
			t.Errorf("it is gone: %v", err)
		}
	}
}

func TestLogIsAppended(t *testing.T) {
	d := hatcheryRun(t, 4)
	for _, line := range []string{"first\n", "second\n"} {
		log, err := d.Log(0)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := log.Write([]byte(line)); err != nil {
			t.Fatal(err)
		}
		if err := log.Close(); err != nil {
			t.Fatal(err)
		}
	}
	if text, err := os.ReadFile(d.LogPath(0)); err != nil || string(text) != "first\nsecond\n" {
		t.Errorf("%q, %v", text, err)
	}
	if _, err := d.Log(1); err == nil {
		t.Error("a log of part 1 of 1")
	}
}
