package main

import (
	"context"
	"fmt"
	"io"
	"os"
	"os/signal"
	"syscall"
)

// interrupted is the cause of a context that a signal ended.
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

// watchSignals returns a context that the first SIGINT or SIGTERM ends. The
// second one ends the program at once. stop gives the signals back.
func watchSignals(talk io.Writer) (ctx context.Context, stop func()) {
	ctx, cancel := context.WithCancelCause(context.Background())
	signals := make(chan os.Signal, 2)
	done := make(chan struct{})
	signal.Notify(signals, os.Interrupt, syscall.SIGTERM)
	go func() {
		select {
		case s := <-signals:
			fmt.Fprintln(talk, "\nstopping: nothing new is started, what is whole is written; once more leaves at once")
			cancel(&interrupted{s})
		case <-done:
			return
		}
		select {
		case s := <-signals:
			os.Exit((&interrupted{s}).code())
		case <-done:
		}
	}()
	return ctx, func() {
		signal.Stop(signals)
		close(done)
		cancel(nil)
	}
}
