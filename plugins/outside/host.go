package outside

import (
	"context"
	"fmt"
	"log/slog"
	"sync"
	"time"

	"lapgate/pipeline"
)

// State is how a stage outside is.
type State string

// The states.
const (
	Up         State = "up"
	Restarting State = "restarting"
	Down       State = "down" // every unit that needs it is held; it is tried again later
	Closed     State = "closed"
)

// Status is what a host tells of its stage.
type Status struct {
	Name      string    `json:"name"`
	Type      string    `json:"type"` // its name, until it has started once
	State     State     `json:"state"`
	Restarts  int       `json:"restarts"`   // since the host was opened
	LastError string    `json:"last_error"` // why it was restarted last, or is down
	Isolation string    `json:"isolation"`  // how its processes are bound to this one
	Since     time.Time `json:"since"`      // of the state
}

// Host launches the process of one stage, supervises it and is its Factory. A process
// that dies is replaced, with back-off, as often as the budget allows.
type Host struct {
	set   Settings
	log   *slog.Logger
	over  chan struct{} // closed when the supervisor has ended
	calls sync.RWMutex  // a call that must be alone holds it for writing

	mu       sync.Mutex // guards what follows
	status   Status
	proc     *process
	program  *program      // nil = it never started
	revision int           // of program
	changed  chan struct{} // closed and replaced at every change of status
	restarts []time.Time   // within the window
}

// Open launches a stage. The error says why it could not be: wrong path, no handshake,
// another version of the contract, a description that cannot be used.
func Open(ctx context.Context, set Settings, log *slog.Logger) (*Host, error) {
	h, err := newHost(set, log)
	if err != nil {
		return nil, err
	}
	p, err := h.launch(ctx)
	if err != nil {
		return nil, err
	}
	go h.supervise(p)
	return h, nil
}

// OpenLater is Open for a program that must go on without the stage: where it does not
// start, it is down and tried again. The error is for settings that cannot be.
func OpenLater(ctx context.Context, set Settings, log *slog.Logger) (*Host, error) {
	h, err := newHost(set, log)
	if err != nil {
		return nil, err
	}
	p, err := h.launch(ctx)
	if err != nil {
		h.change(Down, neverStarted+err.Error(), nil)
	}
	go h.supervise(p)
	return h, nil
}

const neverStarted = "it has not started yet and is tried again: "

func newHost(set Settings, log *slog.Logger) (*Host, error) {
	if err := set.check(); err != nil {
		return nil, fmt.Errorf("plug-in %s: %w", set.Name, err)
	}
	return &Host{set: set, log: log, changed: make(chan struct{}), over: make(chan struct{}),
		status: Status{Name: set.Name, Type: set.Name, State: Restarting, Since: time.Now()}}, nil
}

// launch starts the first process.
func (h *Host) launch(ctx context.Context) (*process, error) {
	p, err := h.relaunch(ctx)
	if err != nil {
		return nil, pipeline.Fail(pipeline.Unready, "%w", err)
	}
	h.mu.Lock()
	h.proc, h.status.State, h.status.Since = p, Up, time.Now()
	h.mu.Unlock()
	return p, nil
}

// Factory returns the stage's factory, like that of any stage. Before the stage has
// started once, it is one whose stages hold every unit.
func (h *Host) Factory() pipeline.Factory {
	h.mu.Lock()
	defer h.mu.Unlock()
	if h.program == nil {
		return h.unknown()
	}
	return h.program.factory
}

// Revision grows with every new description that the stage gives of itself: at its first
// start, and when a mended program takes the place of another. What was built by an
// earlier Factory is to be built anew.
func (h *Host) Revision() int {
	h.mu.Lock()
	defer h.mu.Unlock()
	return h.revision
}

// Schema returns the JSON Schema of the stage's settings; empty before its first start.
func (h *Host) Schema() string {
	if p := h.known(); p != nil {
		return p.described.GetSettingsSchemaJson()
	}
	return ""
}

func (h *Host) known() *program {
	h.mu.Lock()
	defer h.mu.Unlock()
	return h.program
}

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
	if h.status.State != Up && s == Up {
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
