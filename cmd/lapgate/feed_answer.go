package main

import (
	"fmt"
	"slices"
	"time"

	"google.golang.org/grpc/codes"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

// answered takes a response: a verdict, a refusal, or a request to come back later.
func (f *feeder) answered(r *inspectpb.InspectResponse) {
	f.lastHeard, f.failures, f.saidAway = f.now(), 0, false
	switch m := r.GetMessage().(type) {
	case *inspectpb.InspectResponse_Verdict:
		f.verdict(m.Verdict)
	case *inspectpb.InspectResponse_Refused:
		f.refusal(m.Refused)
	default:
		f.counts.broken++
		f.log.Error("an answer that is neither verdict nor refusal: is the server newer than this program?")
	}
}

// verdict writes the verdict before its frames are forgotten: a crash in between makes
// the line come twice, never not at all.
func (f *feeder) verdict(v *inspectpb.UnitVerdict) {
	line, err := lineOfVerdict(v)
	if err != nil {
		f.counts.broken++
		f.log.Error("a verdict that cannot be read", "inspection", v.GetInspectionId(), "error", err)
		return
	}
	s := f.showingOf(v.GetRequestId(), line.Identity)
	if s == nil {
		f.log.Warn("a verdict for no unit that was waited for", "unit", line.Unit, "inspection", line.InspectionID)
		f.report(line, true)
		return
	}
	line.RequestID = s.requestID
	if !s.refused {
		f.count(line)
	}
	f.report(line, !s.refused)
	if f.worthRetrying(s, line) {
		f.retry(s, line.Identity)
		return
	}
	f.finish(s)
}

// showingOf finds a showing by the id we gave it, else by identity: a stored verdict
// may carry the id of the earlier showing.
func (f *feeder) showingOf(requestID string, id pipeline.Identity) *showing {
	if s := f.byRequest[requestID]; s != nil {
		return s
	}
	for _, s := range f.order {
		of := s.frames[0].header.Identity
		if of.Attempt == 0 {
			of.Attempt = id.Attempt
		}
		if of.Unit != "" && of.Key() == id.Key() {
			return s
		}
	}
	return nil
}

func (f *feeder) count(l verdictLine) {
	f.counts.units++
	switch l.Verdict {
	case pipeline.Accept:
		f.counts.accepted++
	case pipeline.Reject:
		f.counts.rejected++
	default:
		f.counts.heldUnits++
	}
	if l.Stored {
		f.counts.stored++
	}
	if slices.Contains(l.Reasons, pipeline.ReasonLate) {
		f.counts.late++
	}
	if slices.Contains(l.Reasons, pipeline.ReasonConflict) {
		f.counts.conflicts++
	}
}

// report writes a line; an output that cannot be written ends the feed, since a
// verdict would be lost.
func (f *feeder) report(l verdictLine, ejects bool) {
	if err := f.out.write(l, ejects); err != nil && f.fatal == nil {
		f.fatal = fmt.Errorf("verdict of unit %s cannot be written: %w", l.Unit, err)
	}
}

// worthRetrying: the unit is held only for reasons of our own making, and its frames
// are not from a spool, when the part has gone.
func (f *feeder) worthRetrying(s *showing, l verdictLine) bool {
	if l.Verdict != pipeline.Hold || len(l.Reasons) == 0 || s.retries >= f.retryHolds || s.refused || f.fatal != nil {
		return false
	}
	ours := []string{pipeline.ReasonMissingView, pipeline.ReasonStageFailed, pipeline.ReasonLate}
	for _, r := range l.Reasons {
		if !slices.Contains(ours, r) {
			return false
		}
	}
	return !slices.ContainsFunc(s.frames, func(h *held) bool { return h.waited })
}

// retry shows the same frames as the next attempt.
func (f *feeder) retry(s *showing, id pipeline.Identity) {
	f.counts.retried++
	next := f.open(s.keys[0], "")
	next.retries = s.retries + 1
	frames := s.frames
	s.frames = nil
	f.finish(s)
	id.Attempt++
	for _, h := range frames {
		delete(f.byNumber, h.sent)
		h.header.Identity, h.sent, h.at, h.notYet = id, 0, f.now(), time.Time{}
		f.join(next, h)
		f.rekeep(h)
	}
	if key := id.Key(); key != next.keys[0] {
		next.keys = append(next.keys, key)
		f.byKey[key] = append(f.byKey[key], next)
	}
	f.log.Info("shown again as the next attempt", "unit", id.Unit, "attempt", id.Attempt)
}

// rekeep writes a kept frame's new attempt before the old one goes.
func (f *feeder) rekeep(h *held) {
	old := h.kept
	if old == 0 {
		return
	}
	_, pixels, err := f.spool.Get(old)
	if err == nil {
		h.kept, h.pixels = 0, pixels
		if f.keep(h) {
			err = f.spool.Remove(old)
		} else {
			h.kept = old // as the attempt before, should we be stopped now
		}
	}
	if err != nil {
		f.log.Error("the spool cannot take the next attempt", "unit", h.header.Unit, "error", err)
	}
}

// refusal handles a frame, or with frame 0 a whole showing, that was not taken.
func (f *feeder) refusal(r *inspectpb.FrameRefused) {
	code := codes.Code(r.GetCode())
	at := f.byNumber[r.GetFrame()]
	s := at.s
	if r.GetFrame() == 0 {
		s = f.byRequest[r.GetRequestId()]
	}
	if s == nil {
		f.log.Warn("a refusal of no frame that was waited for", "code", code, "message", r.GetMessage())
		return
	}
	if code == codes.ResourceExhausted || code == codes.Unavailable {
		f.later(s, at.f, time.Duration(r.GetRetryAfterMs())*time.Millisecond, code == codes.Unavailable)
		return
	}
	f.refuse(s, at.f, code, r.GetMessage())
}

// later sends a frame (nil = all of the showing) again after a pause, in which no new
// unit is begun either. away says that the server is stopping.
func (f *feeder) later(s *showing, h *held, after time.Duration, away bool) {
	if after <= 0 {
		after = inspectpb.DefaultRetryAfter
	}
	until := f.now().Add(after)
	f.pausedUntil = until
	for _, one := range s.frames {
		if h == nil || one == h {
			delete(f.byNumber, one.sent)
			one.sent, one.notYet = 0, until
			one.waited = one.waited || away
			f.queue(one)
		}
	}
}

// refuse reports the unit as held. After a bad frame the server still gives the unit's
// own verdict; after anything else it does not.
func (f *feeder) refuse(s *showing, h *held, code codes.Code, why string) {
	first := s.frames[0].header
	line := lineOfRefusal(first.Identity, s.requestID, code, why)
	f.log.Error("a frame was refused; its unit is held", "unit", first.Unit, "code", code, "message", why)
	if !s.refused {
		f.counts.heldUnits++
		f.counts.units++
		f.report(line, true)
	}
	s.refused = true
	if code == codes.AlreadyExists {
		f.counts.conflicts++
	} else {
		f.counts.refused++
	}
	if h != nil {
		h.refused = true
		f.release(h)
	}
	if code != codes.InvalidArgument && code != codes.DataLoss {
		for _, key := range s.keys {
			f.reported[key] = true // frames of it may still come from the source
		}
		f.finish(s)
	}
}
