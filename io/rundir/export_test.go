package rundir

import "time"

// What the tests outside the package, which join it with the pool, put in the
// place of the disk and of the machine.

type Files = files

// CreateOn and OpenOn are Create and Open on other files, by a process that a
// later one takes for dead.
func CreateOn(fsys Files, dir string, id Identity, study []byte, meta Meta) (*Dir, error) {
	d, err := create(fsys, dir, id, study, meta)
	if err == nil {
		d.env = mortal
	}
	return d, err
}

func OpenOn(fsys Files, dir string) (*Dir, error) {
	d, err := Open(dir)
	if err == nil {
		d.fs, d.env = fsys, mortal
	}
	return d, err
}

// mortal is a machine on which every other process has ended.
var mortal = &environment{
	self:  func() holder { return holder{Host: "tank-3", PID: 4711} },
	alive: func(holder) bool { return false },
	sleep: func(time.Duration, <-chan struct{}) bool { return true },
	beat:  time.Hour, stale: time.Hour, poll: time.Second,
}

var (
	ErrInjected  = errInjected
	Hatchery     = hatcheryIdentity
	HatcheryMeta = hatcheryMeta
	Decided      = hatcheryDecision
)

// Disk is the real file system.
func Disk() Files { return disk{} }

// Quick is the same without waiting for the medium.
func Quick() Files { return quick{} }

// Failing is a disk whose n-th operation fails.
type Failing struct{ *failing }

func FailAt(n int, err error) Failing { return Failing{&failing{left: n, err: err}} }

// Reached reports whether the operation was reached, Cleaning whether it only
// removed a file that no reader looks at, and What says what it was.
func (f Failing) Reached() bool  { return f.left <= 0 }
func (f Failing) Cleaning() bool { return f.cleaning() }
func (f Failing) What() string   { return f.last }

// Cramped is a disk with room for so many pages.
func Cramped(pages int) Files {
	left := pages * page
	return cramped{left: &left}
}
