package main

import (
	"bytes"
	"regexp"
	"strconv"
	"testing"
	"time"

	"holdfast/resample"
)

// The bar is blank until a draw is done, and its first rate is one that the
// time since the start allows.
func TestFirstFrame(t *testing.T) {
	var out bytes.Buffer
	b := newBar(&out, 400)
	b.show(resample.Progress{Draws: 0, Total: 400})
	if out.Len() > 0 {
		t.Errorf("before the first draw: %q", out.String())
	}
	const wait = 120 * time.Millisecond
	time.Sleep(wait)
	b.show(resample.Progress{Draws: 2, Total: 400})
	frame := out.String()
	b.end()
	rate := regexp.MustCompile(`\((\d+)/400, (\d+) draws/s\)`).FindStringSubmatch(frame)
	if rate == nil || rate[1] != "2" {
		t.Fatalf("no rate in %q", frame)
	}
	if perSecond, err := strconv.Atoi(rate[2]); err != nil || float64(perSecond) > 2/wait.Seconds()+1 {
		t.Errorf("%s draws per second after %v", rate[2], wait)
	}
}
