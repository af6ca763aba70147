package mark

import (
	"sync/atomic"
	"time"
)

var lastUse atomic.Int64

// Used notes that somebody uses the program: a key, a press, a turn of the wheel.
func Used() { lastUse.Store(time.Now().UnixNano()) }

// LastUse returns when somebody used the program last, the zero time if nobody has.
func LastUse() time.Time {
	n := lastUse.Load()
	if n == 0 {
		return time.Time{}
	}
	return time.Unix(0, n)
}
