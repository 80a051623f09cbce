package main

import (
	"context"
	"fmt"
	"strings"

	"holdfast/io/deal"
)

// preview prints what would be submitted.
func (d *dealing) preview(ctx context.Context) error {
	o, deaf, err := d.dealer().Look(ctx)
	if err != nil {
		return err
	}
	if deaf != nil {
		fmt.Fprintf(d.talk, "the scheduler cannot be asked, so nothing is taken to be in work: %s\n", oneLine(deaf.Error()))
	}
	d.tellState(o)
	unmade := o.Unmade()
	if len(unmade) == 0 {
		return nil
	}
	parts, err := d.job.PartsScript(unmade)
	if err != nil {
		return err
	}
	judge, err := d.job.JudgeScript()
	if err != nil {
		return err
	}
	options := d.deal.sbatch
	for _, s := range []struct {
		kind    string
		text    []byte
		options []string
	}{
		{"parts", parts, options},
		{"judge", judge, append(append([]string{}, options...), d.dealer().Dependency([]string{"JOB"}))},
	} {
		words := append(append([]string{"sbatch", "--parsable"}, s.options...), deal.Folder(d.job.Run)+"/"+s.kind+".sh")
		fmt.Fprintf(d.p.out, "# %s\n%s\n", shellCommand(words), s.text)
	}
	fmt.Fprintln(d.talk, "nothing was made or submitted")
	return nil
}

// submit hands over what is missing, and says how to go on.
func (d *dealing) submit(ctx context.Context) error {
	o, err := d.dealer().Deal(ctx)
	if o != nil {
		d.tellState(o)
		d.tellJobs(o)
	}
	return err
}

// tellState says which parts are whole, in work and missing.
func (d *dealing) tellState(o *deal.Outcome) {
	n := d.o.share.parts
	fmt.Fprintf(d.talk, "%d of %d parts are whole, %d are in work\n", n-len(o.Missing), n, len(o.InWork))
	if len(o.Missing) == 0 {
		fmt.Fprintf(d.talk, "nothing is left to be made: holdfast judge %s\n", shellWord(d.deal.out))
	}
}

// tellJobs says what was submitted.
func (d *dealing) tellJobs(o *deal.Outcome) {
	s := o.Submitted
	if s == nil {
		return
	}
	if s.Array != nil {
		fmt.Fprintf(d.p.out, "parts %s: job %s (%s, %d processors each), in %s\n", deal.Indexes(s.Parts), s.Array.Job,
			sizeText(d.job.Part.Memory), d.job.Part.CPUs, oneLine(s.Script))
	}
	if s.Judge != nil {
		fmt.Fprintf(d.p.out, "judging: job %s, when all of them have ended\n", s.Judge.Job)
	}
	for _, j := range o.Replaced {
		fmt.Fprintf(d.p.out, "cancelled: job %s, a judging job that this one stands for\n", j.Job)
	}
	var jobs []string
	for _, j := range s.Jobs() {
		jobs = append(jobs, j.Job)
	}
	fmt.Fprintf(d.p.out, "to watch: holdfast status %s\nto cancel: scancel %s\n", shellWord(d.deal.out), strings.Join(jobs, " "))
}
