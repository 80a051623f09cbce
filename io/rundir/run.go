package rundir

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"

	"holdfast/selection"
)

// Format is the version of the run directory's format that this package
// writes and reads.
const Format = 3

// maxRunJSON is the longest run.json that is read: 100,000 candidates with
// long names need about 20 MB.
const maxRunJSON = 1 << 28

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
	Centre       []float64  `json:"centre"`    // means of the design columns: Identity.CandidateColumns, then AlwaysColumns
	Deviation    []float64  `json:"deviation"` // their standard deviations over the rows used
	Excluded     []Excluded `json:"excluded"`

	// EffectiveSize is what the case weights leave of the rows of a half: the
	// median of (sum w)^2 / sum w^2 over the draws; 0 without case weights.
	EffectiveSize float64 `json:"effective_size,omitempty"`
	// Lone names the strata of one unit, whose rows are in no draw.
	Lone []string `json:"lone,omitempty"`
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

// Predictors is what a judgement of the run's draws is told about its columns.
func (r *Run) Predictors() selection.Predictors {
	id := &r.Identity
	n := len(id.CandidateColumns())
	return selection.Predictors{
		Names: id.Candidates, Terms: id.CandidateTerms(), Classes: id.Classes, Deviations: r.Meta.Deviation[:n:n],
		Always: id.AlwaysColumns(), AlwaysDeviations: r.Meta.Deviation[n:],
	}
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
		return nil, otherFormat(head.Format)
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

// otherFormat says what to do with a run of another version of the program.
func otherFormat(found int) error {
	age := "an earlier"
	if found > Format {
		age = "a later"
	}
	return fmt.Errorf("format %d: %s version of holdfast made this run, and this one reads format %d: use that version, or give another --out to make the draws again",
		found, age, Format)
}

// check refuses content that no run can have.
func (r *Run) check() error {
	if err := r.Identity.check(); err != nil {
		return err
	}
	if got := r.Identity.Digest(); got != r.Digest {
		return fmt.Errorf("identity %.12s does not fit its content (%.12s): the file was changed", r.Digest, got)
	}
	if err := r.Meta.check(len(r.Identity.CandidateColumns()) + len(r.Identity.AlwaysColumns())); err != nil {
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
	if !(m.EffectiveSize >= 0) || math.IsInf(m.EffectiveSize, 0) {
		return fmt.Errorf("effective_size: %v is not a finite number", m.EffectiveSize)
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
