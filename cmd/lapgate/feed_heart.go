package main

import (
	"context"
	"log/slog"
	"slices"
	"strings"
	"sync"
	"time"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"lapgate/proto/inspectpb"
)

// heart tells the server that the feed's stations are there, and its log when one of them
// starts or ends to hold. A nil heart does nothing.
type heart struct {
	client inspectpb.InspectionServiceClient
	every  time.Duration
	log    *slog.Logger

	mu       sync.Mutex // guards stations
	stations []station
}

// station is one that the feed sends frames of.
type station struct{ line, station string }

// startHeart beats until the context ends; 0 = never.
func startHeart(ctx context.Context, client inspectpb.InspectionServiceClient, every time.Duration, log *slog.Logger) *heart {
	if every <= 0 {
		return nil
	}
	h := &heart{client: client, every: every, log: log}
	go h.run(ctx)
	return h
}

// add notes a station of the feed; one without a full name is left out.
func (h *heart) add(line, where string) {
	if h == nil || line == "" || where == "" {
		return
	}
	h.mu.Lock()
	defer h.mu.Unlock()
	if s := (station{line, where}); !slices.Contains(h.stations, s) {
		h.stations = append(h.stations, s)
	}
}

func (h *heart) run(ctx context.Context) {
	tick := time.NewTicker(h.every)
	defer tick.Stop()
	said := map[station]string{}
	for {
		select {
		case <-ctx.Done():
			return
		case <-tick.C:
		}
		h.mu.Lock()
		list := slices.Clone(h.stations)
		h.mu.Unlock()
		for _, s := range list {
			if !h.beat(ctx, s, said) {
				return
			}
		}
	}
}

// beat is false for a server that knows no heartbeat. Another failure is the stream's
// to tell.
func (h *heart) beat(ctx context.Context, s station, said map[station]string) bool {
	ctx, cancel := context.WithTimeout(ctx, h.every)
	defer cancel()
	r, err := h.client.Heartbeat(ctx, &inspectpb.HeartbeatRequest{Line: s.line, Station: s.station})
	if err != nil {
		return status.Code(err) != codes.Unimplemented
	}
	why := strings.Join(r.GetBecause(), "; ")
	switch {
	case why != "" && why != said[s]:
		h.log.Warn("the station holds its units", "line", s.line, "station", s.station, "because", why)
	case why == "" && said[s] != "":
		h.log.Info("the station judges again", "line", s.line, "station", s.station)
	}
	said[s] = why
	return true
}
