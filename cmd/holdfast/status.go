package main

import (
	"fmt"
	"io"
	"slices"
	"text/tabwriter"
	"time"

	"github.com/spf13/cobra"

	"holdfast/io/rundir"
)

func (p *program) statusCommand() *cobra.Command {
	var asJSON bool
	c := &cobra.Command{
		Use:   "status RUN [--json]",
		Short: "how far a run is: draws done, parts, time left, last failure",
		Long: `status reads every finished block of a run directory and says how many draws are
whole, what each part does and on which machine, how long the rest will take,
and what went wrong last. It changes nothing.`,
		Example: "  holdfast status demo/study.run",
		Args:    exactly("RUN"),
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print JSON")
	c.RunE = func(_ *cobra.Command, args []string) error {
		s, err := readStatus(args[0], time.Now())
		if err != nil {
			return err
		}
		if asJSON {
			return p.writeJSON(s)
		}
		return s.print(p.out)
	}
	return c
}

// status is how far a run is.
type status struct {
	Run         string       `json:"run"`
	Draws       int          `json:"draws"` // that the run is to have
	Done        int          `json:"done"`
	Redrawn     int          `json:"redrawn"`      // draws made anew because they could not be fitted
	Uncertified []int        `json:"uncertified"`  // draws that end early, at a fit that was not certified
	Damaged     []string     `json:"damaged"`      // blocks that cannot be used
	Left        *float64     `json:"left_seconds"` // null: nothing is running, or too little is known
	LastFailure *string      `json:"last_failure"`
	Parts       []partStatus `json:"parts"`
}

// partStatus is how far a part is.
type partStatus struct {
	Part    int      `json:"part"`
	State   string   `json:"state"` // waiting, running, killed, stopped, failed, done
	Draws   int      `json:"draws"`
	Done    int      `json:"done"`
	Host    string   `json:"host"`
	PID     int      `json:"pid"` // of the process that works on it; 0: none
	Workers int      `json:"workers"`
	Started string   `json:"started"`
	Ended   string   `json:"ended"`
	Seconds float64  `json:"seconds"`
	Left    *float64 `json:"left_seconds"`
	Failure string   `json:"failure"`
	Log     string   `json:"log"`
}

// waiting and killed are states that no process writes.
const (
	stateWaiting = "waiting"
	stateKilled  = "killed"
)

// readStatus reads a run directory at the moment now.
func readStatus(path string, now time.Time) (*status, error) {
	dir, err := openRun(path)
	if err != nil {
		return nil, err
	}
	found, err := dir.Survey()
	if err != nil {
		return nil, err
	}
	records, err := dir.Parts()
	if err != nil {
		return nil, err
	}
	run := dir.Run()
	s := &status{Run: path, Draws: run.Meta.Number, Done: found.Count, Damaged: []string{}, Uncertified: []int{}}
	s.countDraws(found.Certificates)
	for _, d := range found.Damaged {
		s.Damaged = append(s.Damaged, d.Path)
	}
	s.countParts(&run, dir.PartCount(), found.Missing)
	for i := range s.Parts {
		s.Parts[i].Log = dir.LogPath(i)
	}
	for _, r := range records {
		if r.Part < len(s.Parts) {
			s.Parts[r.Part].join(r, dir, now)
		}
	}
	s.conclude(records)
	return s, nil
}

// countDraws counts the draws that are whole and not as they should be.
func (s *status) countDraws(list []rundir.Certificate) {
	for _, c := range list {
		if c.Redraws > 0 {
			s.Redrawn++
		}
		if c.Uncertified {
			s.Uncertified = append(s.Uncertified, c.Draw)
		}
	}
	slices.Sort(s.Uncertified)
}

// countParts says how many draws each part has, and how many are done.
func (s *status) countParts(run *rundir.Run, parts int, missing []int) {
	s.Parts = make([]partStatus, parts)
	for i := range s.Parts {
		s.Parts[i] = partStatus{Part: i, State: stateWaiting}
	}
	for d := range run.Meta.Number {
		p := &s.Parts[run.PartOf(d)]
		p.Draws++
		p.Done++
	}
	for _, d := range missing {
		s.Parts[run.PartOf(d)].Done--
	}
	for i := range s.Parts {
		if p := &s.Parts[i]; p.Done == p.Draws {
			p.State = rundir.StateDone
		}
	}
}

// join adds what the part's own record says. A record that says that the part
// is running is believed as long as somebody holds the part's lock.
func (p *partStatus) join(r rundir.Part, dir *rundir.Dir, now time.Time) {
	p.Host, p.Workers, p.Started, p.Ended, p.Seconds, p.Failure = r.Host, r.Workers, r.Started, r.Ended, r.Seconds, r.Failure
	whole := p.Done == p.Draws
	switch {
	case r.State == rundir.StateRunning:
		p.State = stateKilled
		if h, alive := dir.Holder(p.Part); alive {
			p.State, p.Host, p.PID = rundir.StateRunning, h.Host, h.PID
		} else if whole {
			p.State = rundir.StateDone
		}
	case r.State == rundir.StateDone && !whole:
		p.State = stateWaiting // extended, or blocks were lost
	case !whole:
		p.State = r.State
	}
	if p.State == rundir.StateRunning {
		p.Left = timeLeft(r, p.Done, p.Draws, now)
	}
}

// timeLeft is the time that the rest of a part takes at the speed so far; nil
// where nothing was made yet.
func timeLeft(r rundir.Part, done, draws int, now time.Time) *float64 {
	started, err := time.Parse(time.RFC3339, r.Started)
	made := done - r.Before
	if err != nil || made <= 0 {
		return nil
	}
	left := now.Sub(started).Seconds() / float64(made) * float64(draws-done)
	left = max(left, 0)
	return &left
}

// conclude finds the time left and the last failure of the run.
func (s *status) conclude(records []rundir.Part) {
	for _, p := range s.Parts {
		if p.Left != nil && (s.Left == nil || *p.Left > *s.Left) {
			s.Left = p.Left
		}
	}
	last := slices.MaxFunc(append([]rundir.Part{{}}, records...), func(a, b rundir.Part) int {
		switch {
		case a.Failure == "" || b.Failure == "":
			return len(a.Failure) - len(b.Failure)
		case a.Ended < b.Ended:
			return -1
		}
		return 1
	})
	if last.Failure != "" {
		text := fmt.Sprintf("part %d on %s at %s: %s", last.Part, last.Host, last.Ended, last.Failure)
		s.LastFailure = &text
	}
}

// print shows a status to people.
func (s *status) print(out io.Writer) error {
	fmt.Fprintf(out, "%s: %d of %d draws are whole\n", oneLine(s.Run), s.Done, s.Draws)
	if s.Redrawn > 0 {
		fmt.Fprintln(out, redrawnText(s.Redrawn))
	}
	if n := len(s.Uncertified); n > 0 {
		fmt.Fprintf(out, "%s early, at a fit that could not be certified: %s\n", endText(n), ranges(s.Uncertified))
	}
	for _, path := range s.Damaged {
		fmt.Fprintf(out, "damaged, made again by the next run: %s\n", oneLine(path))
	}
	w := tabwriter.NewWriter(out, 0, 8, 2, ' ', 0)
	fmt.Fprintln(w, "part\tstate\tdraws\thost\tprocess\ttime left\t")
	for _, p := range s.Parts {
		process, left := "", ""
		if p.PID != 0 {
			process = fmt.Sprint(p.PID)
		}
		if p.Left != nil {
			left = timeText(*p.Left)
		}
		fmt.Fprintf(w, "%d\t%s\t%d of %d\t%s\t%s\t%s\t\n", p.Part, p.State, p.Done, p.Draws, oneLine(p.Host), process, left)
	}
	if err := w.Flush(); err != nil {
		return err
	}
	if s.Left != nil {
		fmt.Fprintf(out, "about %s left, for the parts that are running\n", timeText(*s.Left))
	}
	if s.LastFailure != nil {
		fmt.Fprintf(out, "last failure: %s\n", oneLine(*s.LastFailure))
	}
	for _, p := range s.Parts {
		if p.State == stateKilled {
			fmt.Fprintf(out, "part %d was killed: out of memory, a time limit, or a power cut; its log is %s\n", p.Part, oneLine(p.Log))
		}
	}
	return nil
}

// timeText writes a time for people.
func timeText(s float64) string {
	return time.Duration(s * float64(time.Second)).Round(time.Second).String()
}

// endText writes how many draws end.
func endText(n int) string {
	if n == 1 {
		return "1 draw ends"
	}
	return fmt.Sprintf("%d draws end", n)
}
