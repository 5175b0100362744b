package outside

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"

	"google.golang.org/protobuf/proto"

	"lapgate/pipeline"
	"lapgate/proto/stagepb"
)

// program is what a stage says of itself, and the factory made from that.
type program struct {
	described *stagepb.DescribeResponse
	settings  settingsType
	factory   pipeline.Factory
}

// relaunch launches a process and learns from it what the stage is, which may be another
// version of it than before.
func (h *Host) relaunch(ctx context.Context) (*process, error) {
	p, err := launch(h.set)
	if err != nil {
		return nil, err
	}
	d, err := p.describe(ctx)
	if err == nil {
		err = h.learn(d, p.launched.isolation)
	}
	if err != nil {
		p.close()
		return nil, fmt.Errorf("plug-in %s (%s): %w", h.set.Name, h.set.Path, err)
	}
	return p, nil
}

func (h *Host) learn(d *stagepb.DescribeResponse, isolation string) error {
	known := h.known()
	if known != nil && same(d, known.described) {
		return nil
	}
	if known != nil && d.GetType() != known.described.GetType() {
		return fmt.Errorf("its program has changed: it is the stage %s now, it was %s", d.GetType(), known.described.GetType())
	}
	settings, err := newSettingsType(d.GetSettingsSchemaJson(), d.GetDefaultSettingsJson())
	if err != nil {
		return fmt.Errorf("settings: %w", err)
	}
	made := &program{described: d, settings: settings}
	made.factory = h.factoryOf(made)
	h.mu.Lock()
	defer h.mu.Unlock()
	if h.status.State == Down && d.GetType() != h.status.Type { // what recipes were read with
		return fmt.Errorf("it is the stage %s, but was listed as %s while it could not be asked; give it that name, or restart the server", d.GetType(), h.status.Type)
	}
	h.program, h.revision = made, h.revision+1
	h.status.Type, h.status.Isolation = d.GetType(), isolation
	return nil
}

func same(a, b proto.Message) bool {
	options := proto.MarshalOptions{Deterministic: true}
	x, errX := options.Marshal(a)
	y, errY := options.Marshal(b)
	return errX == nil && errY == nil && bytes.Equal(x, y)
}

// unknown is the factory of a stage that has not started yet: nobody knows its settings or
// its scope, and its stages hold every unit. The caller holds h.mu.
func (h *Host) unknown() pipeline.Factory {
	return pipeline.Factory{Type: h.set.Name, Version: "unknown", Summary: "Has not started yet; its settings are not known.",
		New: func(decode pipeline.Decode, env pipeline.Environment) (pipeline.Stage, any, error) {
			return waiting{h, decode, env}, json.RawMessage("null"), nil
		}}
}

// waiting is a stage that was built before its program had started.
type waiting struct {
	host   *Host
	decode pipeline.Decode
	env    pipeline.Environment
}

// Run implements pipeline.Stage: it holds the unit, and says why.
func (w waiting) Run(context.Context, *pipeline.Item) error {
	name, made := w.host.set.Name, w.host.known()
	if made == nil {
		return pipeline.Fail(pipeline.Unready, "plug-in %s: the stage is down: %s", name, w.host.Status().LastError)
	}
	stage, _, err := made.factory.New(w.decode, w.env)
	if err != nil {
		return pipeline.Fail(pipeline.Unready, "plug-in %s has started, and the recipe does not fit it: %w", name, err)
	}
	if c, ok := stage.(interface{ Close() error }); ok {
		_ = c.Close()
	}
	return pipeline.Fail(pipeline.Unready, "plug-in %s has just started; show the unit again", name)
}
