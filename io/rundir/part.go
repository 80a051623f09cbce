package rundir

import (
	"encoding/json"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"
)

// Part is what parts/I.json says about the share of a run that one machine
// makes.
type Part struct {
	Part       int     `json:"part"`
	State      string  `json:"state"` // running, done, stopped or failed
	Failure    string  `json:"failure,omitempty"`
	Host       string  `json:"host"`
	Workers    int     `json:"workers"`
	Kernel     string  `json:"kernel"`
	Started    string  `json:"started"` // RFC 3339
	Ended      string  `json:"ended"`
	Seconds    float64 `json:"seconds"` // spent on draws
	Draws      int     `json:"draws"`   // of the part on disk
	Before     int     `json:"before"`  // of them, those that were there when the process started
	Violation  float64 `json:"violation"`
	Gap        float64 `json:"gap"`
	Borderline int     `json:"borderline"`
	Twins      int     `json:"twins"`
	Redrawn    int     `json:"redrawn"` // draws that were made anew because they could not be fitted
	// What the process was and took; 0 where it was not told.
	PID        int     `json:"pid,omitempty"`
	Restart    int     `json:"restart,omitempty"`     // how often the scheduler started it again
	PeakBytes  int64   `json:"peak_bytes,omitempty"`  // resident
	CPUSeconds float64 `json:"cpu_seconds,omitempty"` // of all processors together
	// Uncertified are the draws whose path ended early.
	Uncertified []int `json:"uncertified"`
}

// States of a part.
const (
	StateRunning = "running"
	StateDone    = "done"
	StateStopped = "stopped" // asked to end before its last draw
	StateFailed  = "failed"
)

// PartOf returns the part that a draw belongs to: pair k, or bootstrap draw k,
// is of part k mod N.
func (r *Run) PartOf(draw int) int {
	if r.halves() {
		draw /= 2
	}
	return draw % r.Meta.Parts
}

// PartCount returns the number of parts that the draws are shared out to.
func (d *Dir) PartCount() int {
	return d.Run().Meta.Parts
}

// checkPart refuses a part that the run does not have.
func (d *Dir) checkPart(part int) error {
	if n := d.PartCount(); part < 0 || part >= n {
		return fmt.Errorf("rundir: %s: part %d: the run has parts 0 to %d", d.path, part, n-1)
	}
	return nil
}

// WritePart writes parts/I.json.
func (d *Dir) WritePart(p Part) error {
	if err := d.checkPart(p.Part); err != nil {
		return err
	}
	p.Uncertified = append([]int{}, p.Uncertified...)
	return troubled(writeFile(d.fs, d.partPath(p.Part), func(w io.Writer) error {
		e := json.NewEncoder(w)
		e.SetIndent("", " ")
		return e.Encode(p)
	}))
}

// ReadPart reads parts/I.json.
func (d *Dir) ReadPart(part int) (*Part, error) {
	path := d.partPath(part)
	text, err := readLimited(path, maxRunJSON)
	if err != nil {
		return nil, fmt.Errorf("rundir: %w", err)
	}
	var p Part
	if err := json.Unmarshal(text, &p); err != nil {
		return nil, fmt.Errorf("rundir: %s: not readable: %w", path, err)
	}
	if p.Part != part {
		return nil, fmt.Errorf("rundir: %s: it says that it is part %d", path, p.Part)
	}
	return &p, nil
}

// Parts lists the parts that have left a record, ascending.
func (d *Dir) Parts() ([]Part, error) {
	entries, err := os.ReadDir(d.join(partsFolder))
	if err != nil {
		return nil, fmt.Errorf("rundir: %w", err)
	}
	var list []Part
	for _, e := range entries {
		var part int
		if _, err := fmt.Sscanf(e.Name(), "%d.json", &part); err != nil || e.Name() != filepath.Base(d.partPath(part)) {
			continue
		}
		p, err := d.ReadPart(part)
		if err != nil {
			return nil, err
		}
		list = append(list, *p)
	}
	return sortedParts(list), nil
}

func (d *Dir) partPath(part int) string { return d.join(partsFolder, fmt.Sprintf("%d.json", part)) }

// sortedParts orders by number; the folder's order is that of the text.
func sortedParts(list []Part) []Part {
	slices.SortFunc(list, func(a, b Part) int { return a.Part - b.Part })
	return list
}
