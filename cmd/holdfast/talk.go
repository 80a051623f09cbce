package main

import (
	"bytes"
	"fmt"
	"io"
	"sync"
	"time"
)

// talk is what a run says to people: on the terminal as long as there is one,
// and, once there is a run directory, in its log with the time before each
// line. Neither can fail the run.
type talk struct {
	mu   sync.Mutex
	term io.Writer      // nil once the terminal was closed
	log  io.WriteCloser // nil: no log
	open bool           // the log's last line has no end yet
	hung bool           // the terminal was closed
}

// Write never fails.
func (t *talk) Write(b []byte) (int, error) {
	t.mu.Lock()
	defer t.mu.Unlock()
	if t.term != nil {
		_, _ = t.term.Write(b)
	}
	t.note(b)
	return len(b), nil
}

// logged returns the writer for what goes to the log alone.
func (t *talk) logged() io.Writer { return (*logOnly)(t) }

type logOnly talk

func (l *logOnly) Write(b []byte) (int, error) {
	t := (*talk)(l)
	t.mu.Lock()
	defer t.mu.Unlock()
	t.note(b)
	return len(b), nil
}

// note writes to the log. Empty lines say nothing there. The caller holds mu.
func (t *talk) note(b []byte) {
	if t.log == nil {
		return
	}
	var out bytes.Buffer
	for line := range bytes.Lines(b) {
		if !t.open && len(bytes.TrimSpace(line)) > 0 {
			out.WriteString(time.Now().UTC().Format(time.RFC3339) + " ")
		} else if !t.open {
			continue
		}
		out.Write(line)
		t.open = line[len(line)-1] != '\n'
	}
	// Where the disk is full, the draws say so; a log line is not worth more.
	_, _ = t.log.Write(out.Bytes())
}

// keep opens the log: from now on everything is in it too.
func (t *talk) keep(log io.WriteCloser) {
	t.mu.Lock()
	defer t.mu.Unlock()
	t.log, t.open = log, false
}

// hangUp notes that the terminal was closed. What led to it is let go; streams
// that lead elsewhere, such as files, stay.
func (t *talk) hangUp() {
	t.mu.Lock()
	t.hung = true
	if isTerminal(t.term) {
		t.term = nil
	}
	t.mu.Unlock()
	fmt.Fprintln(t, "the terminal was closed; the run goes on")
}

// readers returns w, or, after the terminal was closed, w without its errors:
// that nobody reads any more is no failure of a run whose results are on disk.
func (t *talk) readers(w io.Writer) io.Writer {
	t.mu.Lock()
	defer t.mu.Unlock()
	if t.hung {
		return unread{w}
	}
	return w
}

type unread struct{ w io.Writer }

func (u unread) Write(b []byte) (int, error) {
	_, _ = u.w.Write(b)
	return len(b), nil
}

// end closes the log.
func (t *talk) end() {
	t.mu.Lock()
	defer t.mu.Unlock()
	if t.log != nil {
		_ = t.log.Close()
		t.log = nil
	}
}
