package change

import (
	"fmt"
	"sync"
	"time"
)

// HLC is a reading of a hybrid logical clock (Kulkarni and others 2014): 48 bits of
// milliseconds since 1970 and a counter of 16 bits for readings within one millisecond.
type HLC uint64

const counterBits = 16

// MaxAhead is how far another device's clock may run ahead of ours and still move our own
// clock on. A reading beyond it stays in its change and is not adopted.
const MaxAhead = 24 * time.Hour

// HLCAt returns the first reading of t's millisecond; times before 1970 give 0.
func HLCAt(t time.Time) HLC {
	ms := t.UnixMilli()
	if ms < 0 {
		return 0
	}
	return HLC(uint64(ms) << counterBits)
}

// Time returns the wall clock part in UTC, to the millisecond.
func (h HLC) Time() time.Time { return time.UnixMilli(int64(h >> counterBits)).UTC() }

// Counter returns the number of the reading within its millisecond.
func (h HLC) Counter() uint16 { return uint16(h) }

// String returns time and counter.
func (h HLC) String() string {
	return fmt.Sprintf("%s+%d", h.Time().Format("2006-01-02T15:04:05.000Z"), h.Counter())
}

// Ahead reports whether the reading lies more than MaxAhead after now.
func (h HLC) Ahead(now time.Time) bool { return h > HLCAt(now.Add(MaxAhead)) }

// Clock gives readings that never repeat and never fall. Its zero value must not be used:
// see NewClock. It is safe for use by several goroutines.
type Clock struct {
	mu   sync.Mutex
	now  func() time.Time
	last HLC
}

// NewClock makes a clock over now (nil: time.Now). last is the highest reading this device
// gave or adopted before; one that lies more than MaxAhead in the future (the system's clock
// was set back after having been far ahead) is not gone on from.
func NewClock(now func() time.Time, last HLC) *Clock {
	if now == nil {
		now = time.Now
	}
	c := &Clock{now: now}
	c.Observe(last)
	return c
}

// Tick returns a reading higher than all before it.
func (c *Clock) Tick() HLC {
	c.mu.Lock()
	defer c.mu.Unlock()
	c.last = max(c.last+1, HLCAt(c.now()))
	return c.last
}

// Last returns the highest reading given or adopted so far.
func (c *Clock) Last() HLC {
	c.mu.Lock()
	defer c.mu.Unlock()
	return c.last
}

// Observe takes note of another device's reading, so that what is written from now on comes
// after it. It returns false, and adopts nothing, if the reading is more than MaxAhead ahead
// of this device's own system clock.
func (c *Clock) Observe(h HLC) bool {
	c.mu.Lock()
	defer c.mu.Unlock()
	if h.Ahead(c.now()) {
		return false
	}
	c.last = max(c.last, h)
	return true
}
