//go:build darwin || dragonfly || freebsd || linux || netbsd || openbsd

package main

import (
	"errors"
	"os"

	"golang.org/x/sys/unix"
)

// lock takes the lock of an open file without waiting. The system drops it with the
// process, however that ends.
func lock(f *os.File) error {
	switch err := unix.Flock(int(f.Fd()), unix.LOCK_EX|unix.LOCK_NB); {
	case errors.Is(err, unix.EWOULDBLOCK):
		return errHeld
	case errors.Is(err, unix.ENOSYS), errors.Is(err, unix.ENOTSUP), errors.Is(err, unix.EOPNOTSUPP):
		return errNoLocks
	default:
		return err
	}
}
