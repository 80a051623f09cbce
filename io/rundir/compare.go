package rundir

import (
	"encoding/json"
	"fmt"
	"maps"
	"slices"
	"strings"
)

// Change is one way in which two runs differ: a key in the words of the study,
// and what it was and is.
type Change struct {
	Key, Old, New string
}

// Mismatch says that what is asked for is not what the run was made of.
type Mismatch struct {
	What    string // begins the message
	Changes []Change
}

// mostNamed is how many changes a message names.
const mostNamed = 10

func (m *Mismatch) Error() string {
	lines := []string{m.What}
	for i, c := range m.Changes {
		if i == mostNamed {
			lines = append(lines, fmt.Sprintf("  and %d more", len(m.Changes)-mostNamed))
			break
		}
		lines = append(lines, fmt.Sprintf("  %s: %s, now %s", c.Key, c.Old, c.New))
	}
	return strings.Join(lines, "\n")
}

// Compare returns a *Mismatch where draws made for id and meta do not belong
// into this run: another study or table, another major version of the program,
// another architecture (its draws are the same to the digits printed and not
// to the bit), or another lattice. Zero values of meta mean what they mean to
// Create, but Parts 0 is the run's own. The number of draws may differ.
func (d *Dir) Compare(id Identity, meta Meta) error {
	run := d.Run()
	if meta.Parts == 0 {
		meta.Parts = run.Meta.Parts
	}
	changes := differences(&run, &Run{Digest: id.Digest(), Identity: id.resolved(), Meta: meta.resolved()})
	if len(changes) == 0 {
		return nil
	}
	return &Mismatch{
		What:    fmt.Sprintf("rundir: %s: the run was made with other settings (give another --out for a run of its own):", d.path),
		Changes: changes,
	}
}

// differences lists what keeps draws of b from being draws of a.
func differences(a, b *Run) []Change {
	changes := identityChanges(a.Identity, b.Identity)
	if a.Digest != b.Digest && len(changes) == 0 {
		changes = []Change{{"identity", brief(a.Digest), brief(b.Digest)}}
	}
	return append(changes, metaChanges(&a.Meta, &b.Meta)...)
}

// metaChanges lists what differs beside the identity.
func metaChanges(a, b *Meta) (changes []Change) {
	add := func(key, old, now string) {
		if old != now {
			changes = append(changes, Change{key, old, now})
		}
	}
	if major(a.Tool) != major(b.Tool) {
		add("version of the program", a.Tool, b.Tool)
	}
	add("architecture", a.Architecture, b.Architecture)
	add("parts", fmt.Sprint(a.Parts), fmt.Sprint(b.Parts))
	if len(changes) == 0 {
		// They follow from the identity on one architecture and version. If
		// they differ, the program computes something else than it did.
		add("lambda_max", fmt.Sprint(a.LambdaMax), fmt.Sprint(b.LambdaMax))
		add("last step", fmt.Sprint(a.LastStep), fmt.Sprint(b.LastStep))
	}
	return changes
}

// major is the major version in a version text such as "v1.4.2 3ac1". A text
// without a version is that of a build from a checkout, which counts as 0.
func major(tool string) string {
	word, _, _ := strings.Cut(strings.TrimPrefix(tool, "holdfast "), " ")
	digits, _, dotted := strings.Cut(strings.TrimPrefix(word, "v"), ".")
	if !dotted || digits == "" || strings.Trim(digits, "0123456789") != "" {
		return "0"
	}
	return digits
}

// studyKeys are the words of the study for names in run.json that differ from
// them.
var studyKeys = map[string]string{
	"fingerprint":  "table (fingerprint of the values that are fitted)",
	"kind":         "outcome.kind",
	"outcome":      "outcome.column",
	"success":      "outcome.success",
	"classes":      "classes of the outcome",
	"time":         "outcome.time",
	"event":        "outcome.event",
	"entry":        "outcome.entry",
	"strata":       "outcome.strata",
	"ties":         "outcome.ties",
	"offset":       "outcome.offset",
	"exposure":     "outcome.exposure",
	"case_weight":  "outcome.case_weight",
	"always":       "candidates.always",
	"missing":      "table.missing",
	"penalty.luck": "chance of luck (selected over candidates when the run was made)",
}

// studyKey is what a name in run.json is called in a message. A predictor's
// name may hold anything, also a full stop.
func studyKey(path string) string {
	if key, ok := studyKeys[path]; ok {
		return key
	}
	if name, ok := strings.CutPrefix(path, "terms."); ok {
		return "columns of " + name
	}
	if name, ok := strings.CutPrefix(path, "reference."); ok {
		return "candidates.reference." + name
	}
	return path
}

// identityChanges compares what run.json holds of two identities, name by
// name, so that a name that is added to it later is compared too.
func identityChanges(a, b Identity) []Change {
	old, now := members(a), members(b)
	var changes []Change
	for _, name := range slices.Sorted(maps.Keys(union(old, now))) {
		changes = append(changes, memberChanges(name, old[name], now[name])...)
	}
	return changes
}

// members lists a value's members as they stand in JSON.
func members(v any) map[string]any {
	text, err := json.Marshal(v)
	if err != nil {
		return nil // check refused it before
	}
	d := json.NewDecoder(strings.NewReader(string(text)))
	d.UseNumber()
	var m map[string]any
	if d.Decode(&m) != nil {
		return nil
	}
	return m
}

func union(a, b map[string]any) map[string]bool {
	all := make(map[string]bool)
	for _, m := range []map[string]any{a, b} {
		for name := range m {
			all[name] = true
		}
	}
	return all
}

// memberChanges compares what stands at a path of names; objects member by
// member, and lists of names by what is gone and what is new.
func memberChanges(path string, old, now any) []Change {
	oldMembers, oldIs := old.(map[string]any)
	nowMembers, nowIs := now.(map[string]any)
	if oldIs || nowIs {
		var changes []Change
		for _, name := range slices.Sorted(maps.Keys(union(oldMembers, nowMembers))) {
			changes = append(changes, memberChanges(path+"."+name, oldMembers[name], nowMembers[name])...)
		}
		return changes
	}
	oldList, oldIs := old.([]any)
	nowList, nowIs := now.([]any)
	if plain(old) == plain(now) || len(oldList)+len(nowList) == 0 && (oldIs || nowIs) {
		return nil
	}
	if oldIs || nowIs {
		return []Change{listChange(studyKey(path), names(oldList), names(nowList))}
	}
	return []Change{{studyKey(path), brief(plain(old)), brief(plain(now))}}
}

// plain writes a value as run.json does.
func plain(v any) string {
	switch v := v.(type) {
	case nil:
		return "not set"
	case string:
		return v
	}
	text, err := json.Marshal(v)
	if err != nil {
		return fmt.Sprint(v)
	}
	return string(text)
}

// brief cuts a text that is long: a fingerprint.
func brief(text string) string {
	const most = 40
	if len(text) <= most {
		return text
	}
	return text[:12] + "..."
}

func names(list []any) []string {
	out := make([]string, len(list))
	for i, v := range list {
		out[i] = plain(v)
	}
	return out
}

// listChange says which names are gone and which are new.
func listChange(key string, old, now []string) Change {
	one, many := "column", "columns"
	if key == studyKeys["classes"] {
		one, many = "class", "classes"
	}
	count := func(names []string) string {
		if len(names) == 1 {
			return "1 " + one
		}
		return fmt.Sprintf("%d %s", len(names), many)
	}
	c := Change{key, count(old), count(now)}
	gone, added := without(old, now), without(now, old)
	if len(gone) > 0 {
		c.Old += ", among them " + some(gone)
	}
	if len(added) > 0 {
		c.New += ", among them " + some(added)
	}
	if len(gone) == 0 && len(added) == 0 {
		c.New += " in another order"
	}
	return c
}

// without lists the names of a that b does not have.
func without(a, b []string) (out []string) {
	in := make(map[string]bool, len(b))
	for _, name := range b {
		in[name] = true
	}
	for _, name := range a {
		if !in[name] {
			out = append(out, name)
		}
	}
	return out
}

// some names the first of a list, and how many more there are.
func some(list []string) string {
	if len(list) <= mostNamed {
		return strings.Join(list, ", ")
	}
	return fmt.Sprintf("%s and %d more", strings.Join(list[:mostNamed], ", "), len(list)-mostNamed)
}
