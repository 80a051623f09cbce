package forecast_test

import (
	"fmt"
	"time"

	"holdfast/resample/forecast"
)

func ExampleTiming_Wall() {
	// One worker took 40 ms for a draw; with eight at the same time it was 54.
	round := func(workers, draws int, busy time.Duration) forecast.Round {
		return forecast.Round{Workers: workers, Draws: draws, Busy: busy}
	}
	t := forecast.Timing{
		First:    round(1, 2, 80*time.Millisecond),
		Alone:    round(1, 50, 2*time.Second),
		Together: round(8, 100, 5400*time.Millisecond),
	}
	for _, workers := range []int{1, 8, 15} {
		fmt.Println(workers, t.Wall(3000, workers))
	}
	fmt.Println("parts:", forecast.Parts(10*time.Hour, 20*time.Minute, 1500))
	// Output:
	// 1 2m0s
	// 8 20.304s
	// 15 13.6s
	// parts: 3
}
