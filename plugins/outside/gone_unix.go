//go:build unix

package outside

import (
	"errors"
	"syscall"
)

// gone reports whether there is no process of that number.
func gone(pid int) bool { return errors.Is(syscall.Kill(pid, 0), syscall.ESRCH) }
