package main

import (
	"fmt"
	"io"
	"os"
	"sync"
	"sync/atomic"
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

// newMeter returns a bar on a terminal (over the draws that are to be made) with
// lines in the log, and elsewhere lines on both. before is the number of draws that were there already.
func newMeter(term io.Writer, t *talk, before, total int) meter {
	if isTerminal(term) {
		return both{newBar(term, total-before), newLines(t.logged(), before, total)}
	}
	return newLines(t, before, total)
}

// both is two meters.
type both [2]meter

func (b both) show(p resample.Progress) {
	b[0].show(p)
	b[1].show(p)
}

func (b both) end() {
	b[0].end()
	b[1].end()
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

// bar is the progress bar of a terminal. It appears with the first draw, and is drawn again every second even
// when no draw was finished, so that the time left stays true.
type bar struct {
	bar   *progressbar.ProgressBar
	begun atomic.Bool // a draw is done: until then there is no rate to show
	stop  chan struct{}
	once  sync.Once
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
	b.bar.StartWithoutRender() // else the clock would start with the first draw that is done
	go func() {
		tick := time.NewTicker(time.Second)
		defer tick.Stop()
		for {
			select {
			case <-tick.C:
				if !b.begun.Load() {
					continue
				}
				// A bar that cannot be drawn is no reason to end a run.
				_ = b.bar.RenderBlank()
			case <-b.stop:
				return
			}
		}
	}()
	return b
}

func (b *bar) show(p resample.Progress) {
	if p.Draws > 0 {
		b.begun.Store(true)
		_ = b.bar.Set(p.Draws)
	}
}

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
	w             io.Writer
	before, total int
	start, last   time.Time
	wait          time.Duration
}

func newLines(w io.Writer, before, total int) *lines {
	now := time.Now()
	return &lines{w: w, before: before, total: total, start: now, last: now, wait: firstLine}
}

func (l *lines) show(p resample.Progress) {
	now := time.Now()
	if now.Sub(l.last) < l.wait || p.Draws == 0 || p.Draws == p.Total {
		return
	}
	l.last, l.wait = now, min(2*l.wait, longest)
	rate := float64(p.Draws) / now.Sub(l.start).Seconds()
	left := time.Duration(float64(p.Total-p.Draws) / rate * float64(time.Second))
	memory := ""
	if used, _ := memoryNow(); used > 0 {
		memory = ", memory " + sizeText(used)
	}
	fmt.Fprintf(l.w, "%d of %d draws, %.3g per second, about %s left%s\n", l.before+p.Draws, l.total, rate, left.Round(time.Second), memory)
}

func (l *lines) end() {}
