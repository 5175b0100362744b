package intake

import (
	"context"

	"lapgate/pipeline"
	"lapgate/server/ledger"
)

// judgeAtGate judges a showing unless a master of its station keeps it from that, and
// holds a master's own showing against what is expected of it. leave is to be called
// once the record is kept.
func (s *showing) judgeAtGate(ctx context.Context, id pipeline.Identity, digest string) (record ledger.Inspection, leave func(), err error) {
	gate := s.intake.settings.Gate
	if gate == nil {
		return s.judge(ctx, id, digest, nil), func() {}, nil
	}
	conditions := s.conditions()
	holds, leave, err := gate.Enter(ctx, id, s.pipe.Recipe, conditions)
	if err != nil {
		return record, nil, err
	}
	record = s.judge(ctx, id, digest, holds)
	record.Check = gate.Check(s.pipe.Recipe, record, conditions)
	return record, leave, nil
}

// conditions is what the showing was made with: each view's calibration, and its lamp and
// lens where the frames' tags name them.
func (s *showing) conditions() map[string]string {
	out := map[string]string{}
	for _, r := range s.results {
		view := r.Item.View
		out["calibration of view "+view] = "none"
		if c := r.Item.Calibration; c != nil {
			out["calibration of view "+view] = c.Hash
		}
		for _, f := range r.Item.Frames {
			for _, tag := range []string{"lamp", "lens"} {
				if v := f.Header.Tags[tag]; v != "" {
					out[tag+" of view "+view] = v
				}
			}
		}
	}
	return out
}
