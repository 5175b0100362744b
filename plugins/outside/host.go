package outside

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"log/slog"
	"sync"
	"time"

	"google.golang.org/protobuf/proto"

	"lapgate/pipeline"
	"lapgate/proto/stagepb"
)

// State is how a stage outside is.
type State string

// The states.
const (
	Up         State = "up"
	Restarting State = "restarting"
	Down       State = "down" // its restart budget is spent: every unit that needs it is held
	Closed     State = "closed"
)

// Status is what a host tells of its stage.
type Status struct {
	Name      string    `json:"name"`
	Type      string    `json:"type"`
	State     State     `json:"state"`
	Restarts  int       `json:"restarts"`   // since the host was opened
	LastError string    `json:"last_error"` // why it was restarted last, or is down
	Isolation string    `json:"isolation"`  // how its processes are bound to this one
	Since     time.Time `json:"since"`      // of the state
}

// Host launches the process of one stage, supervises it and is its Factory. A process
// that dies is replaced, with back-off, as often as the budget allows.
type Host struct {
	set       Settings
	log       *slog.Logger
	described *stagepb.DescribeResponse
	factory   pipeline.Factory
	over      chan struct{} // closed when the supervisor has ended
	calls     sync.RWMutex  // a call that must be alone holds it for writing

	mu       sync.Mutex // guards what follows
	status   Status
	proc     *process
	changed  chan struct{} // closed and replaced at every change of status
	restarts []time.Time   // within the window
}

// Open launches a stage. The error says why it could not be: wrong path, no handshake,
// another version of the contract, a description that cannot be used.
func Open(ctx context.Context, set Settings, log *slog.Logger) (*Host, error) {
	if err := set.check(); err != nil {
		return nil, fmt.Errorf("plug-in %s: %w", set.Name, err)
	}
	p, err := launch(set)
	if err != nil {
		return nil, pipeline.Fail(pipeline.Unready, "%w", err)
	}
	h := &Host{set: set, log: log, proc: p, changed: make(chan struct{}), over: make(chan struct{})}
	if h.described, err = p.describe(ctx); err == nil {
		h.factory, err = h.makeFactory()
	}
	if err != nil {
		p.close()
		return nil, pipeline.Fail(pipeline.Unready, "plug-in %s (%s): %w", set.Name, set.Path, err)
	}
	h.status = Status{Name: set.Name, Type: h.described.GetType(), State: Up, Isolation: p.launched.isolation, Since: time.Now()}
	go h.supervise(p)
	return h, nil
}

// Factory returns the stage's factory, like that of any stage.
func (h *Host) Factory() pipeline.Factory { return h.factory }

// Schema returns the JSON Schema of the stage's settings.
func (h *Host) Schema() string { return h.described.GetSettingsSchemaJson() }

// Status returns how the stage is.
func (h *Host) Status() Status {
	h.mu.Lock()
	defer h.mu.Unlock()
	return h.status
}

// Close ends the stage's process. Twice is no error.
func (h *Host) Close() error {
	h.change(Closed, "closed", nil)
	<-h.over
	return nil
}

// change sets the state and tells those who wait for one. Closed is for ever.
func (h *Host) change(s State, why string, p *process) {
	h.mu.Lock()
	if h.status.State == Closed {
		h.mu.Unlock()
		return
	}
	if h.status.State == Restarting && s == Up {
		h.status.Restarts++
	}
	h.status.State, h.status.LastError, h.status.Since, h.proc = s, why, time.Now(), p
	status := h.status
	close(h.changed)
	h.changed = make(chan struct{})
	h.mu.Unlock()
	if h.set.Changed != nil {
		h.set.Changed(status)
	}
}

// now returns the process, the state and what will be closed when that changes.
func (h *Host) now() (*process, Status, chan struct{}) {
	h.mu.Lock()
	defer h.mu.Unlock()
	return h.proc, h.status, h.changed
}

// acquire returns the running process; it waits for one that restarts, no longer than a
// call may take.
func (h *Host) acquire(ctx context.Context) (*process, error) {
	late := time.NewTimer(h.set.Deadline)
	defer late.Stop()
	for {
		p, status, changed := h.now()
		switch {
		case p != nil && !p.doomed():
			return p, nil
		case status.State == Down || status.State == Closed:
			return nil, pipeline.Fail(pipeline.Unready, "the stage is %s: %s", status.State, status.LastError)
		}
		select {
		case <-changed:
		case <-ctx.Done():
			return nil, ctx.Err()
		case <-late.C:
			return nil, pipeline.Fail(pipeline.Unready, "the stage is restarting since %s: %s", status.Since.Format(time.TimeOnly), status.LastError)
		}
	}
}

// supervise stays with the stage: it replaces a process that ended.
func (h *Host) supervise(p *process) {
	defer close(h.over)
	for p != nil {
		p = h.outlive(p)
	}
}

// outlive waits for the end of a process and returns its successor; nil = there is none.
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
			h.change(Down, fmt.Sprintf("its %d restarts within %v are spent; mend the plug-in and restart the server. Its last end: %s", h.set.RestartBudget, h.set.RestartWindow, why), nil)
			return nil
		}
		if !h.pause(failures) {
			return nil
		}
		p, err := h.relaunch()
		if err == nil {
			h.change(Up, why, p)
			return p
		}
		why = err.Error()
		h.log.Error("stage outside does not start again", "stage", h.set.Name, "why", why)
		h.change(Restarting, why, nil)
	}
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

// pause backs off before a restart: none after a process that had answered, then twice
// as long each time. It returns false when the host is closed meanwhile.
func (h *Host) pause(failures int) bool {
	wait := time.Duration(0)
	if failures > 0 {
		wait = min(h.set.Backoff<<min(failures-1, 20), maxBackoff)
	}
	timer := time.NewTimer(wait)
	defer timer.Stop()
	for {
		_, status, changed := h.now()
		if status.State == Closed {
			return false
		}
		select {
		case <-changed:
		case <-timer.C:
			return true
		}
	}
}

// relaunch launches a process that must describe itself as the first one did.
func (h *Host) relaunch() (*process, error) {
	p, err := launch(h.set)
	if err != nil {
		return nil, err
	}
	d, err := p.describe(context.Background())
	if err == nil && !same(d, h.described) {
		err = errors.New("its program has changed: it describes itself otherwise than at the start; restart the server")
	}
	if err != nil {
		p.close()
		return nil, err
	}
	return p, nil
}

func same(a, b proto.Message) bool {
	options := proto.MarshalOptions{Deterministic: true}
	x, errX := options.Marshal(a)
	y, errY := options.Marshal(b)
	return errX == nil && errY == nil && bytes.Equal(x, y)
}
