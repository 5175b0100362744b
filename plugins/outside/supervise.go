package outside

import (
	"context"
	"fmt"
	"os"
	"time"
)

// supervise stays with the stage: it replaces a process that ended, and revives a stage
// that is down. p is nil where the first start failed.
func (h *Host) supervise(p *process) {
	defer close(h.over)
	for {
		if p == nil {
			p = h.revive()
		}
		if p == nil {
			return
		}
		p = h.outlive(p)
	}
}

// outlive waits for the end of a process and returns its successor; nil = the stage is
// down or closed.
func (h *Host) outlive(p *process) *process {
	for {
		_, status, changed := h.now()
		if status.State == Closed {
			p.close()
			return nil
		}
		select {
		case <-changed:
			continue
		case <-p.launched.exited:
		case <-time.After(pingEvery):
			p.ping()
			continue
		}
		break
	}
	why := p.withLog(p.death()).Error()
	h.log.Error("stage outside ended; it is restarted", "stage", h.set.Name, "why", why)
	h.change(Restarting, why, nil)
	failures := 1
	if p.answered.Load() {
		failures = 0
	}
	p.bury()
	return h.successor(why, failures)
}

// successor launches processes until one stands or the budget is spent.
func (h *Host) successor(why string, failures int) *process {
	for ; ; failures++ {
		if !h.spend() {
			h.log.Error("stage outside is down: every unit that needs it is held", "stage", h.set.Name, "restarts", h.set.RestartBudget, "window", h.set.RestartWindow, "why", why)
			h.change(Down, fmt.Sprintf("its %d restarts within %v are spent; mend the plug-in: it is tried again when its program changes, and after %v. Its last end: %s",
				h.set.RestartBudget, h.set.RestartWindow, h.set.CoolDown, why), nil)
			return nil
		}
		wait := time.Duration(0) // none after a process that had answered
		if failures > 0 {
			wait = backoff(h.set.Backoff, failures)
		}
		if !h.pause(wait, false) {
			return nil
		}
		p, err := h.relaunch(context.Background())
		if err == nil {
			h.change(Up, why, p)
			return p
		}
		why = err.Error()
		h.log.Error("stage outside does not start again", "stage", h.set.Name, "why", why)
		h.change(Restarting, why, nil)
	}
}

// backoff doubles with each failure in a row.
func backoff(first time.Duration, failures int) time.Duration {
	return min(first<<min(failures-1, 20), maxBackoff)
}

// spend takes one restart from the budget.
func (h *Host) spend() bool {
	h.mu.Lock()
	defer h.mu.Unlock()
	now := time.Now()
	for len(h.restarts) > 0 && now.Sub(h.restarts[0]) > h.set.RestartWindow {
		h.restarts = h.restarts[1:]
	}
	if len(h.restarts) >= h.set.RestartBudget {
		return false
	}
	h.restarts = append(h.restarts, now)
	return true
}

// revive brings back a stage that is down: one that never started with back-off, one whose
// budget was spent after the cool-down, both at once when the program's file changes. It
// then has its whole budget again. nil = the host was closed.
func (h *Host) revive() *process {
	for failures := 1; ; failures++ {
		wait := h.set.CoolDown
		if h.known() == nil {
			wait = min(backoff(max(h.set.Backoff, time.Millisecond), failures), h.set.CoolDown)
		}
		if !h.pause(wait, true) {
			return nil
		}
		p, err := h.relaunch(context.Background())
		if err == nil {
			h.log.Info("stage outside is up again", "stage", h.set.Name)
			h.mu.Lock()
			h.restarts = nil
			h.mu.Unlock()
			h.change(Up, h.Status().LastError, p)
			return p
		}
		h.log.Error("stage outside is still down", "stage", h.set.Name, "why", err)
		why := "it does not start; it is tried again when its program changes, and after " + h.set.CoolDown.String() + ": "
		if h.known() == nil {
			why = neverStarted
		}
		h.change(Down, why+err.Error(), nil)
	}
}

// lookAtProgram is how often the file of a stage that is down is looked at.
const lookAtProgram = 500 * time.Millisecond

// pause waits, no longer than until the program's file changes where that is asked for. It
// returns false when the host is closed meanwhile.
func (h *Host) pause(wait time.Duration, orChange bool) bool {
	was := h.stamp()
	timer, look := time.NewTimer(wait), time.NewTicker(lookAtProgram)
	defer timer.Stop()
	defer look.Stop()
	for {
		_, status, changed := h.now()
		if status.State == Closed {
			return false
		}
		select {
		case <-changed:
		case <-timer.C:
			return true
		case <-look.C:
			if orChange && h.stamp() != was {
				return true
			}
		}
	}
}

// stamp is the size and time of the program's file; empty = there is none.
func (h *Host) stamp() string {
	info, err := os.Stat(h.set.Path)
	if err != nil {
		return ""
	}
	return fmt.Sprint(info.Size(), info.ModTime().UnixNano())
}
