package deal

import (
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"

	"github.com/google/renameio/v2"
)

// ledgerFormat is the version of submitted.json.
const ledgerFormat = 1

// Submission is one time that parts were handed to the scheduler.
type Submission struct {
	Time   string     `json:"time"` // RFC 3339
	Script string     `json:"script,omitempty"`
	Parts  []int      `json:"parts"`
	Array  *Submitted `json:"array,omitempty"` // nil: only a judging job
	Judge  *Submitted `json:"judge,omitempty"` // nil: none was taken
}

// Jobs are the submission's jobs.
func (s Submission) Jobs() []Submitted {
	var jobs []Submitted
	for _, j := range []*Submitted{s.Array, s.Judge} {
		if j != nil {
			jobs = append(jobs, *j)
		}
	}
	return jobs
}

// ledger is jobs/submitted.json.
type ledger struct {
	Format      int          `json:"format"`
	Submissions []Submission `json:"submissions"` // oldest first
}

func ledgerPath(folder string) string { return filepath.Join(folder, "submitted.json") }

// readLedger reads the ledger of a folder; one that is not there is empty.
func readLedger(folder string) (*ledger, error) {
	text, err := os.ReadFile(ledgerPath(folder))
	if errors.Is(err, fs.ErrNotExist) {
		return &ledger{Format: ledgerFormat}, nil
	}
	if err != nil {
		return nil, fmt.Errorf("deal: %w", err)
	}
	var l ledger
	if err := json.Unmarshal(text, &l); err != nil {
		return nil, fmt.Errorf("deal: %s: %w", ledgerPath(folder), err)
	}
	if l.Format != ledgerFormat {
		return nil, fmt.Errorf("deal: %s: format %d is not known to this version", ledgerPath(folder), l.Format)
	}
	return &l, nil
}

func (l *ledger) write(folder string) error {
	text, err := json.MarshalIndent(l, "", " ")
	if err != nil {
		return err
	}
	if err := renameio.WriteFile(ledgerPath(folder), append(text, '\n'), 0o644, renameio.WithTempDir(folder)); err != nil {
		return fmt.Errorf("deal: keeping the job numbers: %w", err)
	}
	return nil
}

// clusters are those that jobs went to, where several are federated.
func (l *ledger) clusters() []string {
	var names []string
	for _, s := range l.Submissions {
		for _, j := range s.Jobs() {
			if j.Cluster != "" && !slices.Contains(names, j.Cluster) {
				names = append(names, j.Cluster)
			}
		}
	}
	return names
}
