//go:build linux || darwin || freebsd || netbsd || openbsd || dragonfly

package store

import (
	"os"
	"syscall"
)

// unlock gives bbolt's lock on the file back. Closing the file is not enough
// after a panic inside bbolt: its memory map, which nothing can reach any more,
// keeps the file and the lock alive.
func unlock(f *os.File) { syscall.Flock(int(f.Fd()), syscall.LOCK_UN) }
