package main

import (
	"context"
	"fmt"
	"io"
	"os"
	"os/signal"
	"sync"
	"sync/atomic"
	"syscall"
	"time"
)

// interrupted is the cause of an end that a signal brought.
type interrupted struct{ signal os.Signal }

func (i *interrupted) Error() string {
	if i.signal == syscall.SIGTERM {
		return "interrupted by SIGTERM"
	}
	return "interrupted"
}

// code is 128 plus the signal's number, as shells have it.
func (i *interrupted) code() int {
	if n, ok := i.signal.(syscall.Signal); ok {
		return 128 + int(n)
	}
	return exitFailed
}

// grace is how long the second signal leaves the program to put things in
// order: a log line, a lock.
const grace = time.Second

// watch listens to signals while a command runs. The first SIGINT or SIGTERM
// ends the command's context, or, while it works in an orderly way, only asks
// it to begin nothing new. The second one ends the context in every case, and
// soon after the program.
type watch struct {
	talk   io.Writer
	cancel context.CancelCauseFunc
	stop   chan struct{} // closed by the first signal

	mu      sync.Mutex
	first   *interrupted
	orderly bool
}

// watchSignals starts listening. end gives the signals back.
func watchSignals(talk io.Writer) (w *watch, ctx context.Context, end func()) {
	ctx, cancel := context.WithCancelCause(context.Background())
	w = &watch{talk: talk, cancel: cancel, stop: make(chan struct{})}
	signals, done := make(chan os.Signal, 2), make(chan struct{})
	signal.Notify(signals, os.Interrupt, syscall.SIGTERM)
	go w.listen(signals, done)
	return w, ctx, func() {
		signal.Stop(signals)
		close(done)
		cancel(nil)
	}
}

func (w *watch) listen(signals <-chan os.Signal, done <-chan struct{}) {
	for {
		select {
		case s := <-signals:
			if w.receive(s) {
				continue
			}
			select {
			case <-time.After(grace):
				os.Exit((&interrupted{s}).code())
			case <-done:
				return
			}
		case <-done:
			return
		}
	}
}

// receive acts on a signal, and reports whether it was the first.
func (w *watch) receive(s os.Signal) bool {
	w.mu.Lock()
	defer w.mu.Unlock()
	i := &interrupted{s}
	if w.first != nil {
		w.cancel(i)
		return false
	}
	w.first = i
	close(w.stop)
	if w.orderly {
		fmt.Fprintln(w.talk, "\nstopping: nothing new is begun, what is in work is finished and kept; once more stops at once")
	} else {
		w.cancel(i)
	}
	return true
}

// begin says that the command listens to stop from here on; it fails if a
// signal came before.
func (w *watch) begin() error {
	w.mu.Lock()
	defer w.mu.Unlock()
	if w.first != nil {
		return w.first
	}
	w.orderly = true
	return nil
}

// end says that the command listens to its context alone again.
func (w *watch) end() {
	w.mu.Lock()
	defer w.mu.Unlock()
	w.orderly = false
}

// cause returns the first signal, nil if there was none.
func (w *watch) cause() *interrupted {
	if w == nil {
		return nil
	}
	w.mu.Lock()
	defer w.mu.Unlock()
	return w.first
}

// surviveHangup keeps the program alive when its terminal closes: closed is
// called then, and writing to what is not there any more fails without ending
// the program. restore gives the signals back, unless the terminal is gone: then
// last words must not end the program either.
func surviveHangup(closed func()) (restore func()) {
	hangup, pipe := make(chan os.Signal, 1), make(chan os.Signal, 1)
	done := make(chan struct{})
	signal.Notify(hangup, syscall.SIGHUP)
	signal.Notify(pipe, syscall.SIGPIPE)
	var gone atomic.Bool
	go func() {
		for {
			select {
			case <-hangup:
				gone.Store(true)
				closed()
			case <-pipe:
			case <-done:
				return
			}
		}
	}()
	return func() {
		if gone.Load() {
			return
		}
		signal.Stop(hangup)
		signal.Stop(pipe)
		close(done)
	}
}
