package main

import "time"

// clock tells the two times that a command needs. They are never mixed: what was
// measured or is due goes by elapsed, which no setting of the system's clock
// moves; wall is only written down, for people and for monitoring.
type clock struct {
	wall    func() time.Time
	elapsed func() time.Duration // since the clock was made, steady
}

// systemClock is the clock of this machine; elapsed is its monotonic one.
func systemClock() clock {
	began := time.Now()
	return clock{wall: time.Now, elapsed: func() time.Duration { return time.Since(began) }}
}
