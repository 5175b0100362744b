package outside

import (
	"errors"
	"os"
	"os/exec"
	"runtime"
	"syscall"

	"golang.org/x/sys/unix"
)

// How a process is bound to its host.
const (
	inNamespace = "its own PID namespace: all its processes die with the server"
	bySignal    = "parent-death signal only: no PID namespace is allowed here, so children of the process may outlive a killed server"
)

// live starts the process and stays with it: the parent-death signal comes when the
// thread that started it ends, so this one lives as long as the process.
func (l *launched) live(started chan<- error) {
	runtime.LockOSThread() // never unlocked: the thread ends with this function
	err := l.start()
	started <- err
	if err != nil {
		close(l.exited)
		return
	}
	pid := l.cmd.Process.Pid
	for errors.Is(unix.Waitid(unix.P_PID, pid, nil, unix.WEXITED|unix.WNOWAIT, nil), unix.EINTR) {
	}
	_ = unix.Kill(-pid, unix.SIGKILL) // its children, while the number is still its own
	if state, err := l.cmd.Process.Wait(); err == nil {
		l.ended = state.String()
	}
	close(l.exited)
	l.closePipes()
}

// start tries a PID namespace, one in a user namespace, and none.
func (l *launched) start() (err error) {
	unprivileged := syscall.SysProcAttr{Cloneflags: unix.CLONE_NEWPID | unix.CLONE_NEWUSER,
		UidMappings: []syscall.SysProcIDMap{{ContainerID: os.Getuid(), HostID: os.Getuid(), Size: 1}},
		GidMappings: []syscall.SysProcIDMap{{ContainerID: os.Getgid(), HostID: os.Getgid(), Size: 1}}}
	for _, try := range []struct {
		attr      syscall.SysProcAttr
		isolation string
	}{{syscall.SysProcAttr{Cloneflags: unix.CLONE_NEWPID}, inNamespace}, {unprivileged, inNamespace}, {syscall.SysProcAttr{}, bySignal}} {
		if l.set.noNamespace && try.isolation == inNamespace {
			continue
		}
		if err = l.prepare(); err != nil {
			return err
		}
		try.attr.Setpgid, try.attr.Pdeathsig = true, syscall.SIGKILL
		l.cmd.SysProcAttr = &try.attr
		if err = l.cmd.Start(); err == nil {
			l.isolation = try.isolation
			return unix.Prlimit(l.cmd.Process.Pid, unix.RLIMIT_CORE, &unix.Rlimit{}, nil)
		}
		if errors.Is(err, os.ErrNotExist) || !namespaceRefused(err) {
			return err
		}
	}
	return err
}

// namespaceRefused tells a system that allows no namespace from a program that cannot be
// started: only the first is tried again without one.
func namespaceRefused(err error) bool {
	return errors.Is(err, unix.EPERM) || errors.Is(err, unix.ENOSPC) || errors.Is(err, unix.EINVAL) || errors.Is(err, unix.EUSERS)
}

func killGroup(cmd *exec.Cmd) error { return unix.Kill(-cmd.Process.Pid, unix.SIGKILL) }
