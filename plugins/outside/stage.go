package outside

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"sync"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"lapgate/pipeline"
	"lapgate/proto/stagepb"
)

// remote is a stage in another process, as a pipeline.Stage. It is opened anew in every
// process that takes the place of one that died.
type remote struct {
	host     *Host
	program  *program // by whose description it was built
	settings string   // JSON
	env      pipeline.Environment

	mu      sync.Mutex // guards what follows
	opened  *process   // in which handle is valid
	handle  uint64
	asked   map[string][]byte // files beside the recipe
	settled string            // effective settings, once opened
}

// newStage decodes and checks settings and opens the stage. A stage that is down or
// restarts is opened when a unit needs it, and that unit is held until it can be.
func (h *Host) newStage(made *program, decode pipeline.Decode, env pipeline.Environment) (pipeline.Stage, any, error) {
	values, err := made.settings.decoded(decode)
	if err != nil {
		return nil, nil, err
	}
	text, err := h.effective(context.Background(), values)
	var wrong *settingsError
	switch {
	case errors.As(err, &wrong):
		return nil, nil, &pipeline.Error{Kind: pipeline.InvalidKind, Err: err}
	case err != nil:
		if text, err = settingsText(values); err != nil {
			return nil, nil, err
		}
	}
	r := &remote{host: h, program: made, settings: text, env: env}
	if err := r.tryOpen(); err != nil {
		return nil, nil, err
	}
	if r.settled != "" {
		text = r.settled
	}
	if values, err = made.settings.value(text); err != nil {
		return nil, nil, fmt.Errorf("stage %s: its effective settings: %w", h.set.Name, err)
	}
	return r, values, nil
}

// tryOpen reports only what the recipe or calibration is to blame for.
func (r *remote) tryOpen() error {
	p, _, _ := r.host.now()
	if p == nil || r.host.known() != r.program {
		return nil
	}
	ctx, cancel := context.WithTimeout(context.Background(), r.host.set.Deadline)
	defer cancel()
	s, err := p.take(ctx)
	if err != nil {
		return nil
	}
	defer p.giveBack(s)
	_, err = r.handleIn(ctx, p, s)
	if pipeline.KindOf(err) == pipeline.InvalidKind {
		return err
	}
	return nil
}

// maxFiles bounds how many files beside the recipe a stage may ask for.
const maxFiles = 16

// handleIn opens the stage in a process where it is not open yet.
func (r *remote) handleIn(ctx context.Context, p *process, s *slot) (uint64, error) {
	r.mu.Lock()
	defer r.mu.Unlock()
	for range maxFiles {
		if r.opened == p {
			return r.handle, nil
		}
		res, err := r.open(ctx, p, s)
		if err != nil {
			return 0, err
		}
		name := res.GetWantedFile()
		if name == "" {
			r.opened, r.handle, r.settled = p, res.GetHandle(), res.GetEffectiveSettingsJson()
			return r.handle, nil
		}
		if err := r.read(name); err != nil {
			return 0, err
		}
	}
	return 0, pipeline.Invalid("stage %s asks for more than %d files beside the recipe", r.host.set.Name, maxFiles)
}

func (r *remote) open(ctx context.Context, p *process, s *slot) (*stagepb.OpenResponse, error) {
	req := &stagepb.OpenRequest{SettingsJson: r.settings, View: r.env.View, Files: r.asked}
	var err error
	if req.Geometry, err = stagepb.FromGeometry(r.env.Geometry); err != nil {
		return nil, err
	}
	if reads(r.program.described, stagepb.ReadsCalibration) {
		if req.Calibration, err = stagepb.FromCalibration(r.env.Calibration, p.packer(s)); err != nil {
			return nil, err
		}
		if req.Calibrations, err = stagepb.FromCalibrations(r.env.Calibrations); err != nil {
			return nil, err
		}
	}
	res, err := p.stub.Open(ctx, req)
	if err != nil {
		return nil, p.failure(err)
	}
	return res, nil
}

func (r *remote) read(name string) error {
	if r.env.ReadFile == nil || !fs.ValidPath(name) {
		return pipeline.Invalid("stage %s asks for the file %q; it cannot be read here", r.host.set.Name, name)
	}
	b, err := r.env.ReadFile(name)
	if err != nil {
		return pipeline.Invalid("stage %s asks for the file %q: %w", r.host.set.Name, name, err)
	}
	if r.asked == nil {
		r.asked = map[string][]byte{}
	}
	r.asked[name] = b
	return nil
}

// Run implements pipeline.Stage. The item is changed only when all that came back has
// passed the checks.
func (r *remote) Run(ctx context.Context, item *pipeline.Item) error {
	if err := ctx.Err(); err != nil {
		return err
	}
	var err error
	for range maxTries {
		err = r.try(ctx, item, errors.Is(err, errShared))
		if !errors.Is(err, errGone) && !errors.Is(err, errShared) {
			break
		}
	}
	return r.named(err)
}

// maxTries is how many processes an item is given to when they end because of others.
const maxTries = 4

// try gives the item to the process that runs now. After one that ended with several
// units under way, each of those has the next one to itself: the unit at fault is then
// known, and only that is held.
func (r *remote) try(ctx context.Context, item *pipeline.Item, alone bool) error {
	lock, unlock := r.host.calls.RLock, r.host.calls.RUnlock
	if alone {
		lock, unlock = r.host.calls.Lock, r.host.calls.Unlock
	}
	lock()
	defer unlock()
	p, err := r.host.acquire(ctx)
	if err != nil {
		return err
	}
	if r.host.known() != r.program {
		return pipeline.Fail(pipeline.Unready, "its program has changed, and the recipe is built anew; show the unit again")
	}
	s, err := p.take(ctx)
	if err != nil {
		return err
	}
	return (&call{remote: r, process: p, slot: s, item: item}).run(ctx)
}

// named puts the plug-in's name before an error and keeps its kind.
func (r *remote) named(err error) error {
	if err == nil || errors.Is(err, context.Canceled) {
		return err
	}
	return &pipeline.Error{Kind: pipeline.KindOf(err), Err: fmt.Errorf("plug-in %s: %w", r.host.set.Name, err)}
}

// Close implements io.Closer; twice is no error.
func (r *remote) Close() error {
	r.mu.Lock()
	defer r.mu.Unlock()
	p, _, _ := r.host.now()
	if p == nil || p.doomed() || r.opened != p {
		r.opened = nil
		return nil
	}
	r.opened = nil
	ctx, cancel := context.WithTimeout(context.Background(), r.host.set.Deadline)
	defer cancel()
	_, err := p.stub.Close(ctx, &stagepb.CloseRequest{Handle: r.handle})
	if status.Code(err) == codes.Unavailable { // it died, and what it held with it
		return nil
	}
	return err
}

func reads(d *stagepb.DescribeResponse, name string) bool {
	for _, r := range d.GetReads() {
		if r == name {
			return true
		}
	}
	return false
}
