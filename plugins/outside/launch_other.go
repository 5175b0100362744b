//go:build !linux

package outside

import "os/exec"

const bySignal = "nothing but its own watch on its parent: no namespace and no parent-death signal on this system"

// live starts the process and stays with it until it ends.
func (l *launched) live(started chan<- error) {
	err := l.prepare()
	if err == nil {
		err = l.cmd.Start()
	}
	l.isolation = bySignal
	started <- err
	if err == nil {
		if state, err := l.cmd.Process.Wait(); err == nil {
			l.ended = state.String()
		}
	}
	close(l.exited)
	if err == nil {
		l.closePipes()
	}
}

func killGroup(cmd *exec.Cmd) error { return cmd.Process.Kill() }
