package main

import (
	"math"
	"os"
	"slices"
	"time"

	"holdfast/io/rundir"
	"holdfast/solver"
)

// books passes finished draws on to the run directory and keeps the records of
// the parts that they belong to.
type books struct {
	r     *runner
	began time.Time
	spent map[int]float64 // seconds of earlier processes, by part
	parts map[int]*rundir.Part
	whole int // draws of the share on disk
}

// newBooks begins the records of the share's parts with what is on disk.
func newBooks(r *runner, found *rundir.Finished) books {
	host, err := os.Hostname()
	if err != nil {
		host = "unknown"
	}
	b := books{r: r, began: time.Now(), spent: map[int]float64{}, parts: map[int]*rundir.Part{}}
	for _, part := range r.o.share.list() {
		if past, err := r.dir.ReadPart(part); err == nil {
			b.spent[part] = past.Seconds
		}
		b.parts[part] = &rundir.Part{
			Part: part, Host: host, Workers: r.o.workers, Kernel: solver.Kernel(),
			Started: b.began.UTC().Format(time.RFC3339), Seconds: b.spent[part],
		}
	}
	for _, c := range found.Certificates {
		b.add(c)
	}
	for _, p := range b.parts {
		p.Before = p.Draws
	}
	return b
}

// add counts a draw that is on disk.
func (b *books) add(c rundir.Certificate) {
	run := b.r.dir.Run()
	p := b.parts[run.PartOf(c.Draw)]
	if p == nil {
		return // of another part
	}
	b.whole++
	p.Draws++
	p.Violation, p.Gap = math.Max(p.Violation, c.Violation), math.Max(p.Gap, c.Gap)
	p.Borderline += c.Borderline
	p.Twins += c.Twins
	if c.Redraws > 0 {
		p.Redrawn++
	}
	if c.Uncertified {
		p.Uncertified = append(p.Uncertified, c.Draw)
	}
}

// Put is where the fits put their outcomes.
func (b *books) Put(draws []int, paths []solver.Path) error {
	if err := b.r.dir.Put(draws, paths); err != nil {
		return err
	}
	for i, d := range draws {
		b.add(rundir.CertificateOf(d, &paths[i]))
	}
	return nil
}

// open notes that the parts are being made.
func (b *books) open() error { return b.write(rundir.StateRunning, nil) }

// close notes how it ended.
func (b *books) close(state string, failure error) error { return b.write(state, failure) }

func (b *books) write(state string, failure error) error {
	for _, part := range b.r.o.share.list() {
		p := b.parts[part]
		p.State, p.Failure = state, ""
		if failure != nil {
			p.Failure = oneLine(failure.Error())
		}
		if state != rundir.StateRunning {
			now := time.Now()
			p.Ended = now.UTC().Format(time.RFC3339)
			p.Seconds = b.spent[part] + now.Sub(b.began).Seconds()
		}
		slices.Sort(p.Uncertified)
		if err := b.r.dir.WritePart(*p); err != nil {
			return err
		}
	}
	return nil
}

// uncertified lists the draws of the share that end early.
func (b *books) uncertified() (list []int) {
	for _, p := range b.parts {
		list = append(list, p.Uncertified...)
	}
	return list
}

// redrawn counts the draws of the share that were made anew.
func (b *books) redrawn() (n int) {
	for _, p := range b.parts {
		n += p.Redrawn
	}
	return n
}

// redrawnText says how many draws were made anew.
func redrawnText(n int) string {
	return count(int64(n), "draw") + " made anew, because rows that were drawn could not be fitted"
}
