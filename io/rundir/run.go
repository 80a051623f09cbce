package rundir

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"unicode/utf8"

	"holdfast/selection"
)

// Format is the version of the run directory's format that this package
// writes and reads.
const Format = 2

// maxRunJSON is the longest run.json that is read: 100,000 candidates with
// long names need about 20 MB.
const maxRunJSON = 1 << 28

// Identity is what decides the bits of a run's draws. Two runs of equal
// identity make equal draws, however many.
type Identity struct {
	Fingerprint string   `json:"fingerprint"` // of the table's values that enter the fits
	Outcome     string   `json:"outcome"`     // column
	Kind        string   `json:"kind"`        // number, yes-no, ...
	Candidates  []string `json:"candidates"`  // those fitted, in table order
	Always      []string `json:"always"`      // in every model, in table order
	CaseWeight  string   `json:"case_weight,omitempty"`
	Missing     string   `json:"missing"` // what is done with missing cells
	Penalty     Penalty  `json:"penalty"`
	Draws       Draws    `json:"draws"`
}

// Penalty is the study's penalty, StopAfter as resolved when the directory
// was made.
type Penalty struct {
	Mix       float64            `json:"mix"`
	Scale     string             `json:"scale"`
	Relative  map[string]float64 `json:"relative,omitempty"`
	Ratio     float64            `json:"ratio"`
	Floor     float64            `json:"floor"`
	StopAfter int                `json:"stop_after"`
}

// Draws says how rows are drawn, without how often.
type Draws struct {
	Design string `json:"design"` // halves or bootstrap
	Seed   uint64 `json:"seed"`
}

// Digest returns the SHA-256 of the identity in hexadecimal.
func (id Identity) Digest() string {
	if len(id.Always) == 0 {
		id.Always = nil // a list without names is no list
	}
	text, err := json.Marshal(id)
	if err != nil {
		return "" // only a value that check refuses gets here
	}
	sum := sha256.Sum256(text)
	return hex.EncodeToString(sum[:])
}

// Meta is what run.json holds beside the identity.
type Meta struct {
	Tool         string     `json:"tool"`         // version of the program
	Kernel       string     `json:"kernel"`       // inner loops in use when the run began
	Architecture string     `json:"architecture"` // as Go names it; "" for Create: that of this program
	TableRows    int        `json:"table_rows"`   // rows of the table
	Rows         int        `json:"rows"`         // rows used
	Number       int        `json:"number"`       // draws asked for
	Parts        int        `json:"parts"`        // parts that the draws are shared out to; 0 for Create: 1
	LambdaMax    float64    `json:"lambda_max"`
	LastStep     int        `json:"last_step"` // last lattice step of a complete path
	Centre       []float64  `json:"centre"`    // means: candidates, then always-in columns
	Deviation    []float64  `json:"deviation"` // standard deviations over the rows used, likewise
	Excluded     []Excluded `json:"excluded"`
}

// Excluded is a column that was asked for and is no candidate.
type Excluded struct {
	Column string `json:"column"`
	Reason string `json:"reason"`
	Of     string `json:"of,omitempty"` // the first column that it is a copy of
}

// Run is the content of run.json.
type Run struct {
	Format     int                 `json:"format"`
	Digest     string              `json:"identity"`
	Identity   Identity            `json:"asked"`
	Meta       Meta                `json:"made"`
	Decision   *selection.Decision `json:"decision"`   // of record; nil until SetDecision
	Judgements []Judged            `json:"judgements"` // every other one, oldest first
	Extensions []Extension         `json:"extensions"` // of the number of draws, oldest first
}

// encode writes run.json.
func (r *Run) encode(w io.Writer) error {
	e := json.NewEncoder(w)
	e.SetIndent("", " ")
	return e.Encode(r)
}

// decodeRun reads run.json and checks all that a reader relies on.
func decodeRun(text []byte) (*Run, error) {
	var head struct {
		Format int `json:"format"`
	}
	if err := json.Unmarshal(text, &head); err != nil {
		return nil, fmt.Errorf("not readable as JSON: %w", err)
	}
	if head.Format != Format {
		return nil, fmt.Errorf("format %d: this program reads format %d", head.Format, Format)
	}
	d := json.NewDecoder(bytes.NewReader(text))
	var r Run
	if err := d.Decode(&r); err != nil {
		return nil, fmt.Errorf("not readable: %w", err)
	}
	if err := r.check(); err != nil {
		return nil, err
	}
	return &r, nil
}

// check refuses content that no run can have.
func (r *Run) check() error {
	if err := r.Identity.check(); err != nil {
		return err
	}
	if got := r.Identity.Digest(); got != r.Digest {
		return fmt.Errorf("identity %.12s does not fit its content (%.12s): the file was changed", r.Digest, got)
	}
	if err := r.Meta.check(len(r.Identity.Candidates) + len(r.Identity.Always)); err != nil {
		return err
	}
	if r.Decision != nil {
		if err := checkDecision(r.Decision); err != nil {
			return fmt.Errorf("decision of record: %w", err)
		}
	}
	for i := range r.Judgements {
		if err := checkDecision(&r.Judgements[i].Decision); err != nil {
			return fmt.Errorf("judgement %d: %w", i, err)
		}
	}
	for i, e := range r.Extensions {
		if e.From < 1 || e.To <= e.From || e.To > r.Meta.Number || i > 0 && e.From != r.Extensions[i-1].To {
			return fmt.Errorf("extension %d: from %d to %d draws of %d: makes no sense", i, e.From, e.To, r.Meta.Number)
		}
	}
	return nil
}

func (id *Identity) check() error {
	if len(id.Candidates) == 0 {
		return errors.New("no candidates")
	}
	if err := distinct(id.Candidates, id.Always); err != nil {
		return err
	}
	for _, text := range []string{id.Fingerprint, id.Outcome, id.Kind, id.Draws.Design} {
		if text == "" || !utf8.ValidString(text) {
			return errors.New("fingerprint, outcome, kind and design must be given as UTF-8 text")
		}
	}
	p := id.Penalty
	if !(p.Mix > 0 && p.Mix <= 1) || !(p.Ratio > 0 && p.Ratio < 1) || !(p.Floor > 0 && p.Floor < 1) || p.StopAfter < 0 {
		return fmt.Errorf("penalty: mix %v, ratio %v, floor %v, stop_after %d: outside their ranges",
			p.Mix, p.Ratio, p.Floor, p.StopAfter)
	}
	for name, v := range p.Relative {
		if !(v > 0) || math.IsInf(v, 0) {
			return fmt.Errorf("penalty: relative %q: %v is not a positive number", name, v)
		}
	}
	return nil
}

// distinct refuses names that are not UTF-8 (JSON would change them) or that
// stand twice (a name could not be traced to its column).
func distinct(lists ...[]string) error {
	seen := map[string]bool{}
	for _, names := range lists {
		for _, name := range names {
			if !utf8.ValidString(name) {
				return fmt.Errorf("column name %q: not valid UTF-8", name)
			}
			if seen[name] {
				return fmt.Errorf("column name %q: given twice", name)
			}
			seen[name] = true
		}
	}
	return nil
}

func (m *Meta) check(columns int) error {
	if len(m.Centre) != columns || len(m.Deviation) != columns {
		return fmt.Errorf("%d means and %d standard deviations for %d columns", len(m.Centre), len(m.Deviation), columns)
	}
	if m.Number < 1 || m.Number > maxDraws {
		return fmt.Errorf("number of draws: %d is not between 1 and %d", m.Number, maxDraws)
	}
	if m.Architecture == "" {
		return errors.New("architecture: not given")
	}
	if m.Parts < 1 || m.Parts > maxDraws {
		return fmt.Errorf("parts: %d is not between 1 and %d", m.Parts, maxDraws)
	}
	if !(m.LambdaMax >= 0) || math.IsInf(m.LambdaMax, 0) {
		return fmt.Errorf("lambda_max: %v is not a finite number", m.LambdaMax)
	}
	if m.LastStep < -maxSteps || m.LastStep > maxSteps {
		return fmt.Errorf("last_step: %d is no lattice step", m.LastStep)
	}
	for i := range m.Centre {
		if bad(m.Centre[i]) || bad(m.Deviation[i]) {
			return fmt.Errorf("column %d: mean %v, standard deviation %v: not finite", i, m.Centre[i], m.Deviation[i])
		}
	}
	return nil
}

func bad(x float64) bool { return math.IsNaN(x) || math.IsInf(x, 0) }
