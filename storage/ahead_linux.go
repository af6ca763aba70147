package storage

import (
	"os"
	"unsafe"

	"golang.org/x/sys/unix"
)

const mostAhead = 64 << 20

// willNeed asks the system to read the mapped memory from the beginning of one slice to that
// of another, if the second does not lie far behind the first. It is a hint: errors do not matter.
// The memory between the two is of the map too, but of neither slice, so its place is handed to
// the system as a number and no slice of it is ever made.
func willNeed(from, to []byte) {
	page := uintptr(os.Getpagesize())
	a, b := uintptr(unsafe.Pointer(unsafe.SliceData(from))), uintptr(unsafe.Pointer(unsafe.SliceData(to)))
	if b <= a || b-a > mostAhead || b-a < 4*page {
		return
	}
	start := a &^ (page - 1)
	_, _, _ = unix.Syscall(unix.SYS_MADVISE, start, b-start, unix.MADV_WILLNEED)
}
