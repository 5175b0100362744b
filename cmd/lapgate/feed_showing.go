package main

import (
	"slices"
	"time"

	"lapgate/cmd/lapgate/spool"
	"lapgate/pipeline"
)

// held is a frame that has no answer yet.
type held struct {
	taken
	kept    spool.Number // in the spool; 0 = in memory only
	sent    uint32       // its number on the stream in use; 0 = to be sent
	notYet  time.Time    // not to be sent before
	waited  bool         // no server answered when it was to be sent
	old     bool         // an earlier run of the program kept it: the part has gone
	queued  bool         // counted as waiting in memory to be sent
	refused bool
}

// showing is the frames of one unit's showing, from the first frame to the verdict.
type showing struct {
	requestID string
	keys      []string // under which its frames come; more than one after a retry
	frames    []*held
	active    bool      // counted as in flight
	refused   bool      // reported as held because a frame was refused
	lastSent  time.Time // of any frame
	retries   int
}

// showingKey names the showing that a frame belongs to.
func showingKey(h pipeline.FrameHeader) string {
	if h.Unit == "" {
		return "request/" + h.Line + "/" + h.Station + "/" + h.Part + "/" + h.RequestID
	}
	return h.Identity.Key()
}

// slot returns the frame that stands at the same place of the showing.
func (s *showing) slot(h pipeline.FrameHeader) *held {
	for _, f := range s.frames {
		if f.header.View == h.View && f.header.Index == h.Index {
			return f
		}
	}
	return nil
}

// next returns the first frame to be sent now, and how long until one may be sent
// where all must wait (0 = none).
func (s *showing) next(now time.Time) (*held, time.Duration) {
	var wait time.Duration
	for _, f := range s.frames {
		if f.sent != 0 || f.refused {
			continue
		}
		d := f.notYet.Sub(now)
		if d <= 0 {
			return f, 0
		}
		if wait == 0 || d < wait {
			wait = d
		}
	}
	return nil, wait
}

// late reports whether a frame of it waited for a server, so that the part may have gone.
func (s *showing) late() bool {
	return slices.ContainsFunc(s.frames, func(f *held) bool { return f.waited })
}

// unsend marks every frame to be sent again, on another stream.
func (s *showing) unsend() {
	s.active = false
	for _, f := range s.frames {
		f.sent = 0
	}
}

// timely returns the header to send now. A frame that waited for a server longer than
// the line waits for a verdict says so; one that waited less leaves the server less.
// Where the source is not live, only waiting for a server counts.
func (f *held) timely(now time.Time, lateAfter time.Duration, live bool) pipeline.FrameHeader {
	h := f.header
	within := time.Duration(h.AnswerWithinMS) * time.Millisecond
	passed := now.Sub(f.at)
	switch {
	case f.old:
		h.Spooled = true
	case !f.waited && !live:
	case within == 0:
		h.Spooled = f.waited && passed > lateAfter
	default:
		h.Spooled = f.waited && passed >= within
		h.AnswerWithinMS = int(max(within-passed, time.Millisecond) / time.Millisecond)
	}
	return h
}
