package rundir

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"sync"
	"time"
)

// NoPart stands for run.json where a part is named.
const NoPart = -1

// LockOptions says what is done about a lock that somebody holds.
type LockOptions struct {
	TakeOver bool            // take it, whoever holds it
	Wait     time.Duration   // wait so long for it; 0: not at all
	Done     <-chan struct{} // closed: wait no longer. nil: never
}

// Held says who holds a lock.
type Held struct {
	Host  string
	PID   int
	Since string // RFC 3339, by the holder's clock
	Part  int    // or NoPart
}

func (h *Held) Error() string {
	what := fmt.Sprintf("part %d is being made", h.Part)
	if h.Part == NoPart {
		what = "run.json is being written"
	}
	who := "another process"
	if h.PID != 0 {
		who = fmt.Sprintf("process %d on %s since %s", h.PID, h.Host, h.Since)
	}
	return fmt.Sprintf("rundir: %s by %s: wait until it ends, or take over from it if it is dead", what, who)
}

// Lock keeps others from making the same part. It avoids double work and
// nothing else: draws are right without it. While it is held its file is
// touched every so often.
type Lock struct {
	path string
	fs   files
	text []byte

	lost chan struct{}
	stop chan struct{}
	once sync.Once
	done sync.WaitGroup
}

// Lock takes the lock of a part. A lock is taken from its holder at once
// where that is a dead process on this host, or an earlier start of the same
// task of the scheduler; and where its file was not touched for two minutes by
// the clock of the file system, which all machines share. Otherwise the error
// is a *Held.
func (d *Dir) Lock(part int, o LockOptions) (*Lock, error) {
	if err := d.checkPart(part); err != nil {
		return nil, err
	}
	l, err := acquire(d.fs, d.env, d.lockPath(part), part, o)
	if err != nil {
		return nil, err
	}
	l.keep(d.env.beat)
	return l, nil
}

func (d *Dir) lockPath(part int) string { return d.join(partsFolder, fmt.Sprintf("%d.lock", part)) }

// Lost is closed when another process has taken the lock over. Both may go
// on; the draws that both make are equal.
func (l *Lock) Lost() <-chan struct{} { return l.lost }

// Unlock gives the lock back. One that was lost is left to its new holder.
func (l *Lock) Unlock() error {
	l.once.Do(func() { close(l.stop) })
	l.done.Wait()
	text, err := readLimited(l.path, maxLock)
	if errors.Is(err, fs.ErrNotExist) || err == nil && !bytes.Equal(text, l.text) {
		return nil
	}
	if err == nil {
		err = l.fs.Remove(l.path)
	}
	if err != nil && !errors.Is(err, fs.ErrNotExist) { // taken over in between
		return fmt.Errorf("rundir: unlock: %w", troubled(err))
	}
	return nil
}

// keep touches the lock's file until it is given back or lost. A touch that
// fails otherwise is tried again at the next beat.
func (l *Lock) keep(beat time.Duration) {
	l.done.Add(1)
	go func() {
		defer l.done.Done()
		tick := time.NewTicker(beat)
		defer tick.Stop()
		for {
			select {
			case <-l.stop:
				return
			case <-tick.C:
			}
			if err := touch(l.path, l.text); errors.Is(err, errLost) {
				close(l.lost)
				return
			}
		}
	}()
}

// errLost says that a lock's file is not ours.
var errLost = errors.New("rundir: another process has the lock")

// touch writes a lock's text over itself, which sets the file's time by the
// clock of the file system; to set a time would take that of this machine. It
// reads and writes one open file, so that the lock of a new holder is not
// overwritten.
func touch(path string, text []byte) error {
	f, err := os.OpenFile(path, os.O_RDWR, 0)
	if errors.Is(err, fs.ErrNotExist) {
		return errLost
	}
	if err != nil {
		return err
	}
	defer f.Close()
	there := make([]byte, len(text)+1)
	n, err := f.ReadAt(there, 0)
	if n > 0 && !bytes.Equal(there[:n], text) {
		return errLost
	}
	if _, err = f.WriteAt(text, 0); err != nil {
		return err
	}
	return f.Sync()
}

// maxLock is the longest lock file that is read.
const maxLock = 1 << 16

// acquire takes the lock at path, and waits for it if that is asked for.
func acquire(fsys files, env *environment, path string, part int, o LockOptions) (*Lock, error) {
	text, err := env.self().encode(part)
	if err != nil {
		return nil, err
	}
	l := &Lock{path: path, fs: fsys, text: text, lost: make(chan struct{}), stop: make(chan struct{})}
	for waited := time.Duration(0); ; waited += env.poll {
		held, err := l.try(env, part, o.TakeOver)
		if err != nil {
			return nil, fmt.Errorf("rundir: lock: %w", troubled(err))
		}
		if held == nil {
			return l, nil
		}
		if waited >= o.Wait || !env.sleep(env.poll, o.Done) {
			return nil, held
		}
	}
}

// try takes the lock if it is free or may be taken, and otherwise says who has
// it. What is found can change at any moment, so a few rounds are made.
func (l *Lock) try(env *environment, part int, takeOver bool) (*Held, error) {
	held := &Held{Part: part}
	for range 5 {
		err := writeNew(l.fs, l.path, writes(l.text))
		if !errors.Is(err, fs.ErrExist) {
			return nil, err
		}
		text, idle, err := l.look()
		if errors.Is(err, fs.ErrNotExist) {
			continue // given back meanwhile
		}
		if err != nil {
			return nil, err
		}
		h := decodeHolder(text)
		held = &Held{Host: h.Host, PID: h.PID, Since: h.Since, Part: part}
		if !takeOver && idle < env.stale && !env.dead(h) {
			return held, nil
		}
		if err := l.displace(text); err != nil {
			return nil, err
		}
	}
	return held, nil
}

// look reads the lock's file, and how long ago it was touched: its time
// against that of a file made now in the same folder, so that no machine's own
// clock is asked.
func (l *Lock) look() (text []byte, idle time.Duration, err error) {
	text, err = readLimited(l.path, maxLock)
	if err != nil {
		return nil, 0, err
	}
	info, err := os.Stat(l.path)
	if err != nil {
		return nil, 0, err
	}
	now, err := fileTime(l.fs, filepath.Dir(l.path))
	return text, now.Sub(info.ModTime()), err
}

// fileTime is the time by the clock of the file system that holds a folder.
func fileTime(fsys files, folder string) (time.Time, error) {
	path := filepath.Join(folder, tempName("clock"))
	f, err := fsys.Create(path)
	if err != nil {
		return time.Time{}, err
	}
	defer fsys.Remove(path)
	_, err = f.Write([]byte("."))
	if err := errors.Join(err, f.Close()); err != nil {
		return time.Time{}, err
	}
	info, err := os.Stat(path)
	if err != nil {
		return time.Time{}, err
	}
	return info.ModTime(), nil
}

// displace takes away the lock that holds text. Another process may have done
// so already and have the lock by now: what was moved is looked at, and put
// back if it is a lock that nobody judged.
func (l *Lock) displace(text []byte) error {
	aside := filepath.Join(filepath.Dir(l.path), tempName(filepath.Base(l.path)))
	if err := l.fs.Rename(l.path, aside); err != nil {
		if errors.Is(err, fs.ErrNotExist) {
			return nil
		}
		return err
	}
	moved, err := readLimited(aside, maxLock)
	if err == nil && !bytes.Equal(moved, text) {
		if err := claim(l.fs, aside, l.path); err == nil || !errors.Is(err, fs.ErrExist) {
			return err
		}
	}
	return l.fs.Remove(aside)
}

// holder is what a lock file says of the process that holds it.
type holder struct {
	Host    string `json:"host"`
	Boot    string `json:"boot,omitempty"`  // tells starts of the machine apart
	Space   string `json:"space,omitempty"` // of process numbers: containers have their own
	PID     int    `json:"pid"`
	Start   string `json:"start,omitempty"` // tells processes of one number apart
	Task    string `json:"task,omitempty"`  // of the scheduler
	Restart int    `json:"restart,omitempty"`
	Part    int    `json:"part"`
	Since   string `json:"since"`
	Token   string `json:"token"` // differs for every lock
}

// encode writes a lock file for a part.
func (h holder) encode(part int) ([]byte, error) {
	h.Part, h.Token, h.Since = part, unique(), time.Now().UTC().Format(time.RFC3339)
	text, err := json.Marshal(h)
	return append(text, '\n'), err
}

// decodeHolder reads a lock file. One that says nothing readable has a holder
// of whom nothing is known.
func decodeHolder(text []byte) holder {
	var h holder
	if json.Unmarshal(text, &h) != nil {
		return holder{}
	}
	return h
}
