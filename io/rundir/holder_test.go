package rundir

import (
	"os"
	"testing"
	"time"
)

// TestHolder: who holds a lock can be asked without taking it, also when that
// process is dead or has not been heard of.
func TestHolder(t *testing.T) {
	d := hatcheryRun(t, 4)
	if h, alive := d.Holder(0); h != nil || alive {
		t.Fatalf("a free lock is held by %v", h)
	}
	l, err := d.Lock(0, LockOptions{})
	if err != nil {
		t.Fatal(err)
	}
	defer l.Unlock()
	if h, alive := d.Holder(0); h == nil || !alive || h.PID != os.Getpid() {
		t.Errorf("our own lock: %v, alive %v", h, alive)
	}
	old := time.Now().Add(-2 * d.env.stale)
	if err := os.Chtimes(d.lockPath(0), old, old); err != nil {
		t.Fatal(err)
	}
	if h, alive := d.Holder(0); h == nil || alive {
		t.Errorf("a lock that nobody touched: %v, alive %v", h, alive)
	}
}

// TestCertificates: each draw's certificate is read back, in draw order, and
// they make up the sums.
func TestCertificates(t *testing.T) {
	d := hatcheryRun(t, 8)
	paths := randomPaths(source(t), 8)
	for _, first := range []int{4, 0} {
		if err := d.Put(upTo(first, first+4), paths[first:first+4]); err != nil {
			t.Fatal(err)
		}
	}
	f, err := d.Survey()
	if err != nil {
		t.Fatal(err)
	}
	borderline := 0
	for i, c := range f.Certificates {
		if want := CertificateOf(i, &paths[i]); c != want {
			t.Errorf("draw %d: %+v, want %+v", i, c, want)
		}
		borderline += c.Borderline
	}
	if len(f.Certificates) != 8 || borderline != f.Borderline {
		t.Errorf("%d certificates, %d steps at the border of %d", len(f.Certificates), borderline, f.Borderline)
	}
}
