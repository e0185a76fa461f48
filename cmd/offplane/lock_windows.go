package main

import (
	"errors"
	"os"

	"golang.org/x/sys/windows"
)

// lock takes the lock of an open file without waiting. The system drops it with the
// process, however that ends.
func lock(f *os.File) error {
	// A byte far behind the contents, so that others can still read them.
	at := windows.Overlapped{OffsetHigh: 1}
	err := windows.LockFileEx(windows.Handle(f.Fd()), windows.LOCKFILE_EXCLUSIVE_LOCK|windows.LOCKFILE_FAIL_IMMEDIATELY, 0, 1, 0, &at)
	if errors.Is(err, windows.ERROR_LOCK_VIOLATION) {
		return errHeld
	}
	return err
}
