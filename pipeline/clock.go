package pipeline

import (
	"sync"
	"time"
)

// A Clock tells the service what time it is. Everything that has a meaning
// for the laboratory (nights, deadlines, stamps on results) asks the clock;
// only the queue's own retries use the machine's.
type Clock interface{ Now() time.Time }

// MachineClock is the machine's clock, used by watch.
type MachineClock struct{}

// Now returns the time of the machine in UTC, cut to the microsecond that the database keeps.
func (MachineClock) Now() time.Time { return time.Now().UTC().Truncate(time.Microsecond) }

// A SetClock stands still until it is moved; the demo replays nights with it.
type SetClock struct {
	mu sync.Mutex
	at time.Time
}

// NewSetClock returns a clock that stands at t.
func NewSetClock(t time.Time) *SetClock { return &SetClock{at: t.UTC()} }

// Now returns where the clock stands.
func (c *SetClock) Now() time.Time {
	c.mu.Lock()
	defer c.mu.Unlock()
	return c.at
}

// MoveTo moves the clock forward to t; it never goes back.
func (c *SetClock) MoveTo(t time.Time) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if t.After(c.at) {
		c.at = t.UTC()
	}
}
