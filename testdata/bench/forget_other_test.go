//go:build !linux

package bench

import (
	"testing"
	"time"
)

func forget(b *testing.B, _ string) { b.Skip("this system does not forget files on request") }

func processors() time.Duration { return 0 }
