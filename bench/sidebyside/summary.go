package main

import (
	"bufio"
	"fmt"
	"io"
	"os"
	"runtime"
	"strings"
)

// summarise prints the results as Markdown.
func summarise(w io.Writer, s settings, results []result) error {
	out := bufio.NewWriter(w)
	first := results[0]
	fmt.Fprintf(out, "%s, %d processors; %s, kernel %s; %s, one thread of linear algebra per process.\n", processor(), runtime.NumCPU(), runtime.Version(),
		first.check.ours.Kernel, first.peer[1][0].Versions)
	fmt.Fprintf(out, "Ours: %d draws a run, scikit-learn: %d; %d interleaved runs of each; ratio %g, lasso_path at tolerance %g, seed %d.\n\n", s.draws, s.peerDraws,
		s.rounds, s.ratio, timedTolerance, s.seed)
	printTimes(out, results)
	printPeer(out, results)
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
	fmt.Fprintln(w, "| case | steps | workers | ours, ms per draw | scikit-learn, ms per draw | ratio of medians | p | our peak MB | its peak MB |")
	fmt.Fprintln(w, "|---|---|---|---|---|---|---|---|---|")
	for _, r := range results {
		for _, n := range allWorkers {
			a, b := perDraw(r.ours[n]), perDrawPeer(r.peer[n])
			fmt.Fprintf(w, "| %v | %d | %d | %s | %s | %.1f | %.1g | %.0f | %.0f |\n", r.of, r.check.ours.Steps, n, spread(a), spread(b),
				median(b)/median(a), mannWhitney(a, b), ourPeak(r.ours[n]), peerPeak(r.peer[n]))
		}
	}
	fmt.Fprintln(w)
}

// printPeer splits the time of the scikit-learn loop: copying and
// standardising the rows, and the path alone.
func printPeer(w io.Writer, results []result) {
	fmt.Fprintln(w, "| case | scikit-learn: copy and standardise, ms per draw | lasso_path alone, ms per draw | lasso_path alone over ours | not converged |")
	fmt.Fprintln(w, "|---|---|---|---|---|")
	for _, r := range results {
		var prepare, path []float64
		failed := 0
		for _, p := range r.peer[1] {
			prepare, path = append(prepare, 1000*p.Prepare), append(path, 1000*p.Path)
			failed += p.NotConverged
		}
		fmt.Fprintf(w, "| %v | %s | %s | %.1f | %d |\n", r.of, spread(prepare), spread(path), median(path)/median(perDraw(r.ours[1])), failed)
	}
	fmt.Fprintln(w)
}

// printChecks says what the timed fits were worth.
func printChecks(w io.Writer, results []result) {
	fmt.Fprintln(w, "| case | entries compared | on one side only | largest violation | largest gap | not certified | borderline | making the model, s | kernels' share of CPU |")
	fmt.Fprintln(w, "|---|---|---|---|---|---|---|---|---|")
	for _, r := range results {
		o := r.check.ours
		different := fmt.Sprint(r.check.different)
		if r.check.tolerances[1] {
			different += fmt.Sprintf(" (%d at tolerance %g)", r.check.tight, tightTolerance)
		}
		var model []float64
		for _, run := range r.ours[1] {
			model = append(model, run.ModelTime)
		}
		fmt.Fprintf(w, "| %v | %d in %d draws | %s | %.1g | %.1g | %d | %d | %.2f | %.0f %% |\n", r.of, r.check.entries, r.check.draws, different, o.Violation,
			o.Gap, o.Failed, o.Borderline, median(model), 100*r.share)
	}
	fmt.Fprintln(w)
}

// printRuns lists every timed run.
func printRuns(w io.Writer, results []result) {
	fmt.Fprintln(w, "Every run, ms per draw, in the order in which they ran:")
	fmt.Fprintln(w)
	for _, r := range results {
		for _, n := range allWorkers {
			fmt.Fprintf(w, "- %v, workers %d: ours %s; scikit-learn %s\n", r.of, n, list(perDraw(r.ours[n])), list(perDrawPeer(r.peer[n])))
		}
	}
}

func perDraw(runs []ours) []float64 {
	var out []float64
	for _, r := range runs {
		out = append(out, 1000*r.PerDraw)
	}
	return out
}

func perDrawPeer(runs []peer) []float64 {
	var out []float64
	for _, r := range runs {
		out = append(out, 1000*r.PerDraw)
	}
	return out
}

// ourPeak and peerPeak are the largest of the runs, in MB of 10^6 bytes; with
// several processes that of the largest process.
func ourPeak(runs []ours) float64 {
	peak := int64(0)
	for _, r := range runs {
		peak = max(peak, r.PeakMemory)
	}
	return float64(peak) / 1e6
}

func peerPeak(runs []peer) float64 {
	peak := int64(0)
	for _, r := range runs {
		peak = max(peak, r.PeakMemory)
	}
	return float64(peak) / 1e6
}

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
