//go:build linux || darwin

package storage

import (
	"os"
	"unsafe"

	"golang.org/x/sys/unix"
)

const mostAhead = 64 << 20

// willNeed asks the system to read the mapped memory from the beginning of one slice to that
// of another, if the second does not lie far behind the first. It is a hint: errors do not matter.
func willNeed(from, to []byte) {
	page := uintptr(os.Getpagesize())
	a, b := uintptr(unsafe.Pointer(unsafe.SliceData(from))), uintptr(unsafe.Pointer(unsafe.SliceData(to)))
	if b <= a || b-a > mostAhead || b-a < 4*page {
		return
	}
	off := a & (page - 1)
	start := unsafe.Add(unsafe.Pointer(unsafe.SliceData(from)), -int(off))
	_ = unix.Madvise(unsafe.Slice((*byte)(start), int(b-a+off)), unix.MADV_WILLNEED)
}
