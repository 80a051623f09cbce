package main

import (
	"bufio"
	"fmt"
	"io"
	"os"
	"runtime"
	"slices"
	"strings"

	"holdfast/solver"
)

// summarise prints the results as Markdown.
func summarise(w io.Writer, s settings, results []result) error {
	out := bufio.NewWriter(w)
	var both, alone []result
	for _, r := range results {
		if _, ok := r.of.loop(); ok {
			both = append(both, r)
		} else {
			alone = append(alone, r)
		}
	}
	fmt.Fprintf(out, "%s, %d processors; %s, kernel %s.\n", processor(), runtime.NumCPU(), runtime.Version(), results[0].check.ours.Kernel)
	fmt.Fprintf(out, "Ours: %d draws a run; %d runs of each, interleaved; seed %d.\n\n", s.draws, s.rounds, s.seed)
	if len(both) > 0 {
		fmt.Fprintf(out, "The loop: %d draws a run; %s, one thread of linear algebra per process.\n\n", s.peerDraws, both[0].peer[1][0].Versions)
		printTimes(out, both)
		printPeer(out, both)
		printEntries(out, both)
	}
	if len(alone) > 0 {
		printAlone(out, alone)
	}
	printChecks(out, results)
	printRuns(out, results)
	return out.Flush()
}

// processor names the machine's processor as Linux knows it.
func processor() string {
	text, err := os.ReadFile("/proc/cpuinfo")
	if err != nil {
		return runtime.GOARCH
	}
	for line := range strings.Lines(string(text)) {
		if name, value, ok := strings.Cut(line, ":"); ok && strings.TrimSpace(name) == "model name" {
			return strings.TrimSpace(value)
		}
	}
	return runtime.GOARCH
}

// printTimes compares seconds per draw. Intervals cover the median with at
// least 95 %.
func printTimes(w io.Writer, results []result) {
	fmt.Fprintln(w, "| case | steps, ratio | workers | ours, ms per draw | scikit-learn, ms per draw | ratio of medians | p | CPU ms per draw: ours, its | peak MB: ours, its |")
	fmt.Fprintln(w, "|---|---|---|---|---|---|---|---|---|")
	for _, r := range results {
		for _, n := range allWorkers {
			a, b := times(r.ours[n], ours.wall), times(r.peer[n], peer.wall)
			fmt.Fprintf(w, "| %v | %d, %.4g | %d | %s | %s | %.1f | %.1g | %s, %s | %.0f, %.0f |\n", r.of, r.check.ours.Steps, r.of.ratio, n, spread(a), spread(b),
				median(b)/median(a), mannWhitney(a, b), digits(median(times(r.ours[n], ours.cpu))), digits(median(times(r.peer[n], peer.cpu))),
				slices.Max(times(r.ours[n], ours.megabytes)), slices.Max(times(r.peer[n], peer.megabytes)))
		}
	}
	fmt.Fprintln(w)
}

// printAlone gives the times of cases without a loop.
func printAlone(w io.Writer, results []result) {
	fmt.Fprintln(w, "| case | steps, ratio | workers | ours, ms per draw | CPU ms per draw | peak MB |")
	fmt.Fprintln(w, "|---|---|---|---|---|---|")
	for _, r := range results {
		for _, n := range allWorkers {
			fmt.Fprintf(w, "| %v | %d, %.4g | %d | %s | %s | %.0f |\n", r.of, r.check.ours.Steps, r.of.ratio, n, spread(times(r.ours[n], ours.wall)),
				digits(median(times(r.ours[n], ours.cpu))), slices.Max(times(r.ours[n], ours.megabytes)))
		}
	}
	fmt.Fprintln(w)
}

// printPeer splits the time of the scikit-learn loop: copying and
// standardising the rows, and the fits alone.
func printPeer(w io.Writer, results []result) {
	fmt.Fprintln(w, "| case | solver | copy and standardise, ms per draw | fits alone, ms per draw | fits alone over ours | not converged |")
	fmt.Fprintln(w, "|---|---|---|---|---|---|")
	for _, r := range results {
		prepare, path := times(r.peer[1], peer.prepare), times(r.peer[1], peer.path)
		failed := 0
		for _, p := range r.peer[1] {
			failed += p.NotConverged
		}
		l, _ := r.of.loop()
		fmt.Fprintf(w, "| %v | %s, %v | %s | %s | %.1f | %d |\n", r.of, l.solver, l.timed, spread(prepare), spread(path),
			median(path)/median(times(r.ours[1], ours.wall)), failed)
	}
	fmt.Fprintln(w)
}

// printEntries says how far both sides select the same.
func printEntries(w io.Writer, results []result) {
	fmt.Fprintln(w, "| case | entries compared | on one side only |")
	fmt.Fprintln(w, "|---|---|---|")
	for _, r := range results {
		different := fmt.Sprint(r.check.different)
		if l, _ := r.of.loop(); r.check.tried[1] {
			different += fmt.Sprintf(" (%d with %v)", r.check.tight, l.tight)
		}
		fmt.Fprintf(w, "| %v | %d in %d draws | %s |\n", r.of, r.check.entries, r.check.draws, different)
	}
	fmt.Fprintln(w)
}

// printChecks says what the timed fits were worth. A duality gap is made for
// numbers only.
func printChecks(w io.Writer, results []result) {
	fmt.Fprintln(w, "| case | largest violation | largest gap | fits not certified | draws with one | entries per draw | borderline | making the model, s | kernels' share of CPU |")
	fmt.Fprintln(w, "|---|---|---|---|---|---|---|---|---|")
	for _, r := range results {
		o := r.check.ours
		gap := "none"
		if r.of.shape.Family == solver.Gaussian {
			gap = fmt.Sprintf("%.1g", o.Gap)
		}
		model := times(r.ours[1], func(run ours) float64 { return run.ModelTime })
		fmt.Fprintf(w, "| %v | %.1g | %s | %d of %d | %d of %d | %.1f | %d | %.2f | %.0f %% |\n", r.of, o.Violation, gap, o.Unreached, o.Unreached+o.Fits,
			o.Failed, len(o.Entries), o.entered(), o.Borderline, median(model), 100*r.share)
	}
	fmt.Fprintln(w)
}

// entered is the mean number of predictors that entered in a draw.
func (r ours) entered() float64 {
	n := 0
	for _, of := range r.Entries {
		n += len(of)
	}
	return float64(n) / float64(len(r.Entries))
}

// printRuns lists every timed run.
func printRuns(w io.Writer, results []result) {
	fmt.Fprintln(w, "Every run, ms per draw, in the order in which they ran:")
	fmt.Fprintln(w)
	for _, r := range results {
		for _, n := range allWorkers {
			fmt.Fprintf(w, "- %v, workers %d: ours %s", r.of, n, list(times(r.ours[n], ours.wall)))
			if len(r.peer[n]) > 0 {
				fmt.Fprintf(w, "; scikit-learn %s", list(times(r.peer[n], peer.wall)))
			}
			fmt.Fprintln(w)
		}
	}
}

// times takes one figure of every run.
func times[R any](runs []R, of func(R) float64) []float64 {
	var out []float64
	for _, r := range runs {
		out = append(out, of(r))
	}
	return out
}

// Milliseconds per draw, and peak memory in MB of 10^6 bytes: of the largest
// process where there are several.
func (r ours) wall() float64      { return 1000 * r.PerDraw }
func (r ours) cpu() float64       { return 1000 * r.CPU }
func (r ours) megabytes() float64 { return float64(r.PeakMemory) / 1e6 }
func (r peer) wall() float64      { return 1000 * r.PerDraw }
func (r peer) cpu() float64       { return 1000 * r.CPU }
func (r peer) prepare() float64   { return 1000 * r.Prepare }
func (r peer) path() float64      { return 1000 * r.Path }
func (r peer) megabytes() float64 { return float64(r.PeakMemory) / 1e6 }

// spread is the median with its interval.
func spread(x []float64) string {
	low, high := interval(x)
	return fmt.Sprintf("%s [%s, %s]", digits(median(x)), digits(low), digits(high))
}

func list(x []float64) string {
	words := make([]string, len(x))
	for i, v := range x {
		words[i] = digits(v)
	}
	return strings.Join(words, " ")
}

// digits prints three significant digits without an exponent.
func digits(v float64) string {
	switch {
	case v >= 99.95:
		return fmt.Sprintf("%.0f", v)
	case v >= 9.995:
		return fmt.Sprintf("%.1f", v)
	}
	return fmt.Sprintf("%.2f", v)
}
