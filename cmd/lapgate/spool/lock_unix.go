//go:build !windows

package spool

import (
	"os"

	"golang.org/x/sys/unix"
)

// lockFile takes the file for this process; the system gives it free when the process ends.
func lockFile(f *os.File) error { return unix.Flock(int(f.Fd()), unix.LOCK_EX|unix.LOCK_NB) }
