package main

import (
	"fmt"
	"log/slog"

	"lapgate/pipeline"
	"lapgate/server/images"
)

// keeper is the image store, or none.
type keeper struct{ store *images.Store }

// newKeeper opens the store in dir; an empty dir keeps no frames.
func newKeeper(dir string, s images.Settings, log *slog.Logger) (*keeper, error) {
	if dir == "" || s.Policy == images.KeepNone {
		log.Info("no frames are kept")
		return &keeper{}, nil
	}
	store, err := images.Open(dir, s)
	if err != nil {
		return nil, fmt.Errorf("images: %w", err)
	}
	return &keeper{store}, nil
}

// keep implements intake's Keep.
func (k *keeper) keep(v pipeline.Verdict, frames []pipeline.Frame, release func()) []string {
	if k.store == nil {
		release()
		return nil
	}
	return k.store.Offer(v, frames, release)
}

func (k *keeper) close() error {
	if k.store == nil {
		return nil
	}
	return k.store.Close()
}
