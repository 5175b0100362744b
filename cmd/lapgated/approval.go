package main

import (
	"context"
	"time"

	"lapgate/pipeline"
	"lapgate/server"
)

// approvalsEvery is how often approvals that another server took are looked for.
const approvalsEvery = 5 * time.Second

// requireApproval has only approved recipes judge, unless the settings lift that.
func (s *serving) requireApproval(ctx context.Context, decode server.Decode) {
	if s.settings.Development {
		s.log.Warn("development is on: every good recipe judges as soon as it is saved, without approval; turn it off where units ship")
		return
	}
	s.book.RequireApproval(s.ledger, decode, time.Now)
	go func() {
		tick := time.NewTicker(approvalsEvery)
		defer tick.Stop()
		for {
			select {
			case <-ctx.Done():
				return
			case <-tick.C:
			}
			if err := s.book.Refresh(ctx); err != nil && ctx.Err() == nil {
				s.log.Error("approvals cannot be read; the last ones stay in force", "error", err)
			}
		}
	}()
}

// tellRecipe logs what a good save led to.
func (s *serving) tellRecipe(path string, r *pipeline.Recipe) {
	if s.book.Judges(r) {
		s.log.Info("recipe in force", "file", path, "part", r.Part, "hash", r.TextHash)
		return
	}
	s.log.Warn("recipe waits for approval", "file", path, "part", r.Part, "hash", r.TextHash,
		"approve", "lapgate approve "+r.TextHash+" --author NAME --person NAME --reason TEXT --effective now")
}
