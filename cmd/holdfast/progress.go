package main

import (
	"fmt"
	"io"
	"os"
	"sync"
	"time"

	"github.com/schollz/progressbar/v3"
	"golang.org/x/term"

	"holdfast/resample"
)

// meter shows how far a run has come.
type meter interface {
	show(resample.Progress)
	end()
}

// newMeter returns a bar on a terminal, and elsewhere a line now and then.
func newMeter(w io.Writer, draws int) meter {
	if isTerminal(w) {
		return newBar(w, draws)
	}
	return &lines{w: w, start: time.Now(), wait: firstLine}
}

// isTerminal reports whether w is a terminal that can redraw a line.
func isTerminal(w io.Writer) bool {
	f, ok := w.(*os.File)
	return ok && os.Getenv("TERM") != "dumb" && term.IsTerminal(int(f.Fd()))
}

// width returns the columns of the terminal w, or 0 where it is none.
func width(w io.Writer) int {
	if f, ok := w.(*os.File); ok {
		if n, _, err := term.GetSize(int(f.Fd())); err == nil {
			return n
		}
	}
	return 0
}

// colour reports whether w is to get colours (https://no-color.org: any value
// of NO_COLOR but the empty one turns them off).
func colour(w io.Writer) bool {
	return isTerminal(w) && os.Getenv("NO_COLOR") == ""
}

// bar is the progress bar of a terminal. It is drawn again every second even
// when no draw was finished, so that the time left stays true.
type bar struct {
	bar  *progressbar.ProgressBar
	stop chan struct{}
	once sync.Once
}

func newBar(w io.Writer, draws int) *bar {
	b := &bar{stop: make(chan struct{}), bar: progressbar.NewOptions(draws,
		progressbar.OptionSetWriter(w),
		progressbar.OptionSetDescription("draws"),
		progressbar.OptionShowCount(),
		progressbar.OptionShowIts(),
		progressbar.OptionSetItsString("draws"),
		progressbar.OptionSetPredictTime(true),
		progressbar.OptionEnableColorCodes(colour(w)),
		progressbar.OptionSetWidth(24),
		progressbar.OptionThrottle(100*time.Millisecond),
		progressbar.OptionClearOnFinish(),
	)}
	go func() {
		tick := time.NewTicker(time.Second)
		defer tick.Stop()
		for {
			select {
			case <-tick.C:
				// A bar that cannot be drawn is no reason to end a run.
				_ = b.bar.RenderBlank()
			case <-b.stop:
				return
			}
		}
	}()
	return b
}

func (b *bar) show(p resample.Progress) { _ = b.bar.Set(p.Draws) }

func (b *bar) end() {
	b.once.Do(func() { close(b.stop) })
	_ = b.bar.Clear()
}

const (
	firstLine = 10 * time.Second // until a run says something about itself
	longest   = 10 * time.Minute // the longest silence
)

// lines writes a line after ten seconds, and then after ever longer pauses.
type lines struct {
	w     io.Writer
	start time.Time
	last  time.Time
	wait  time.Duration
}

func (l *lines) show(p resample.Progress) {
	now := time.Now()
	if l.last.IsZero() {
		l.last = l.start
	}
	if now.Sub(l.last) < l.wait || p.Draws == 0 || p.Draws == p.Total {
		return
	}
	l.last, l.wait = now, min(2*l.wait, longest)
	rate := float64(p.Draws) / now.Sub(l.start).Seconds()
	left := time.Duration(float64(p.Total-p.Draws) / rate * float64(time.Second))
	fmt.Fprintf(l.w, "%d of %d draws, %.3g per second, about %s left\n", p.Draws, p.Total, rate, left.Round(time.Second))
}

func (l *lines) end() {}
