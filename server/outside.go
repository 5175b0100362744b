package server

import (
	"time"

	"lapgate/proto/inspectpb"
)

// OutsideStage is how a stage in a process of its own is.
type OutsideStage struct {
	Type     string
	State    string // up, restarting or down
	Cause    string // why it was restarted last, or is down
	Restarts int    // since the server started
	Since    time.Time
}

// outsideStages encodes those that there are.
func (d Deps) outsideStages() []*inspectpb.OutsideStage {
	if d.OutsideStages == nil {
		return nil
	}
	var out []*inspectpb.OutsideStage
	for _, s := range d.OutsideStages() {
		out = append(out, &inspectpb.OutsideStage{Type: s.Type, State: s.State, Cause: s.Cause, Restarts: int32(s.Restarts), Since: inspectpb.FromTime(s.Since)})
	}
	return out
}
