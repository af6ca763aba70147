//go:build !linux

package disk

import "os"

// syncData is the full sync where the system has no smaller one: F_FULLFSYNC on macOS,
// FlushFileBuffers on Windows (both are what os.File.Sync does there).
func syncData(f *os.File) error { return f.Sync() }

func preallocate(f *os.File, have, size int64) error { return zeros(f, have, size) }
