//go:build !linux

package bench

import "testing"

func forget(b *testing.B, _ string) { b.Skip("this system does not forget files on request") }
