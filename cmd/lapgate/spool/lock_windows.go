package spool

import (
	"os"

	"golang.org/x/sys/windows"
)

// lockFile takes the file for this process; the system gives it free when the process ends.
func lockFile(f *os.File) error {
	return windows.LockFileEx(windows.Handle(f.Fd()), windows.LOCKFILE_EXCLUSIVE_LOCK|windows.LOCKFILE_FAIL_IMMEDIATELY, 0, 1, 0, &windows.Overlapped{})
}
