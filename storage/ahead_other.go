//go:build !linux

package storage

// willNeed is a hint that this system is not given.
func willNeed(_, _ []byte) {}
