package main

import (
	"slices"
	"time"

	"github.com/google/uuid"
	"google.golang.org/grpc/codes"

	"lapgate/cmd/lapgate/spool"
)

// recover takes back the frames that an earlier feed left in the spool.
func (f *feeder) recover() error {
	if f.spool == nil {
		return nil
	}
	for _, n := range f.spool.Numbers() {
		e, err := f.spool.Head(n)
		if err != nil {
			f.log.Error("a kept frame cannot be read; its file stays where it is", "error", err)
			f.counts.broken++
			continue
		}
		f.add(&held{taken: taken{header: e.Header, path: e.Source, at: e.Taken}, kept: n, waited: true, old: true})
	}
	if len(f.order) > 0 {
		f.log.Info("frames of an earlier feed are in the spool", "units", len(f.order), "folder", f.spool.Dir)
	}
	return nil
}

// take puts a frame from the source to its showing. A file that cannot be taken holds
// its unit.
func (f *feeder) take(r reading) {
	if r.err != nil {
		f.unread(r)
		return
	}
	f.counts.frames++
	f.heart.add(r.header.Line, r.header.Station)
	h := &held{taken: r.taken, waited: f.link == nil && f.failures > 0}
	if !f.add(h) {
		f.progress.done()
		return
	}
	f.queue(h)
	if f.alwaysSpool || f.link == nil && f.failures > 0 {
		f.keep(h)
	}
}

// unread reports a file that cannot be taken: its unit is held, once.
func (f *feeder) unread(r reading) {
	f.counts.unread++
	f.log.Error("a file cannot be taken", "error", r.err)
	key := showingKey(r.header)
	told := f.reported[key]
	f.reported[key] = true
	for _, s := range f.byKey[key] {
		told = told || s.refused
		s.refused = true
	}
	f.report(lineOfRefusal(r.header.Identity, r.header.RequestID, codes.InvalidArgument, r.err.Error()), !told)
	f.progress.done()
}

// add puts a frame to the showing that is open for it, or opens one. It is false for a
// frame that is there already.
func (f *feeder) add(h *held) bool {
	key := showingKey(h.header)
	for _, s := range f.byKey[key] {
		there := s.slot(h.header)
		if there == nil {
			f.join(s, h)
			return true
		}
		if there.header.CRC32C == h.header.CRC32C {
			return false
		}
	}
	f.join(f.open(key, h.header.RequestID), h)
	return true
}

func (f *feeder) join(s *showing, h *held) {
	h.header.RequestID = s.requestID
	if len(s.frames) > 0 {
		h.header.Identity = s.frames[0].header.Identity // a retry has another attempt
	}
	s.frames = append(s.frames, h)
}

func (f *feeder) open(key, requestID string) *showing {
	if requestID == "" || (f.byRequest[requestID] != nil && len(f.byKey[key]) == 0) {
		requestID = uuid.NewString() // used for another unit: it names nothing
	}
	s := &showing{requestID: requestID, keys: []string{key}, refused: f.reported[key]}
	if f.byRequest[requestID] == nil {
		f.byRequest[requestID] = s // else when the earlier one is answered
	}
	f.byKey[key] = append(f.byKey[key], s)
	f.order = append(f.order, s)
	return s
}

// keep puts a frame into the spool, if there is one, and lets its pixels go from
// memory. Without room it stays in memory, and nothing more is taken for the moment.
func (f *feeder) keep(h *held) bool {
	if h.kept != 0 {
		return true
	}
	if f.spool == nil || h.pixels == nil {
		return false
	}
	n, err := f.spool.Put(spool.Entry{Header: h.header, Source: h.path, Taken: h.at}, h.pixels)
	if err != nil {
		if !f.spoolFull {
			f.log.Error("frames are not taken from the source until the spool has room", "error", err)
		}
		f.spoolFull = true
		return false
	}
	h.kept = n
	f.release(h)
	return true
}

// queue counts a frame that waits in memory to be sent; the source has to wait when
// there are many.
func (f *feeder) queue(h *held) {
	if !h.queued && h.kept == 0 && h.sent == 0 && !h.refused {
		h.queued = true
		f.queued++
	}
}

func (f *feeder) unqueue(h *held) {
	if h.queued {
		h.queued = false
		f.queued--
	}
}

// release lets pixels go that are on disk, or are not needed any more.
func (f *feeder) release(h *held) {
	f.unqueue(h)
	h.pixels = nil
}

func (f *feeder) keepAll(s *showing) bool {
	all := true
	for _, h := range s.frames {
		all = f.keep(h) && all
	}
	return all
}

// finish forgets a showing that is answered.
func (f *feeder) finish(s *showing) {
	for _, h := range s.frames {
		f.drop(h)
		if f.moveTo != "" && h.path != "" && exists(h.path) {
			if err := moveAside(h.path, f.moveTo); err != nil {
				f.log.Error("an answered file cannot be moved", "file", h.path, "error", err)
			}
		}
	}
	if s.active {
		f.active--
	}
	delete(f.byRequest, s.requestID)
	for _, key := range s.keys {
		left := slices.DeleteFunc(f.byKey[key], func(o *showing) bool { return o == s })
		if f.byKey[key] = left; len(left) == 0 {
			delete(f.byKey, key)
		} else if f.byRequest[left[0].requestID] == nil {
			f.byRequest[left[0].requestID] = left[0]
		}
	}
	f.order = slices.DeleteFunc(f.order, func(o *showing) bool { return o == s })
}

// drop forgets a frame, in memory, in the spool and on the stream.
func (f *feeder) drop(h *held) {
	f.release(h)
	delete(f.byNumber, h.sent)
	if h.kept != 0 {
		if err := f.spool.Remove(h.kept); err != nil {
			f.log.Error("an answered frame stays in the spool and will be sent once more", "error", err)
		}
		h.kept = 0
		f.spoolFull = false
	}
	f.progress.done()
}

// outgoing is the frame to be sent next.
type outgoing struct {
	job job
	s   *showing
	f   *held
}

// choose returns the frame to be sent next, the channel to send it on (nil = none),
// and when to look again.
func (f *feeder) choose() (chan<- job, outgoing, <-chan time.Time) {
	wait := time.Second
	if f.link == nil {
		return nil, outgoing{}, time.After(min(wait, max(f.giveUp, time.Millisecond)))
	}
	now := f.now()
	passes := []func(*showing) bool{func(*showing) bool { return true }}
	if f.live { // new units first, the kept ones when the line is quiet
		passes = []func(*showing) bool{func(s *showing) bool { return !s.late() }, (*showing).late}
	}
	for _, pass := range passes {
		s, h, d := f.firstOf(pass, now)
		if h != nil {
			return f.offer(s, h, now)
		}
		if d > 0 {
			wait = min(wait, d)
		}
	}
	return nil, outgoing{}, time.After(wait)
}

// firstOf returns the first frame that may be sent of the showings that pass.
func (f *feeder) firstOf(pass func(*showing) bool, now time.Time) (*showing, *held, time.Duration) {
	wait := max(f.pausedUntil.Sub(now), 0)
	paused, left := wait > 0, f.active
	for _, s := range f.order {
		mayOpen := f.active < f.inFlight && !paused
		if !mayOpen && left == 0 {
			break // the others are not active
		}
		if s.active {
			left--
		}
		if (!s.active && !mayOpen) || !pass(s) || f.byKey[s.keys[0]][0] != s {
			continue
		}
		h, d := s.next(now)
		if h != nil {
			return s, h, 0
		}
		if d > 0 && (wait == 0 || d < wait) {
			wait = d
		}
	}
	return nil, nil, wait
}

// offer loads the frame's pixels, from the spool where they are not in memory.
func (f *feeder) offer(s *showing, h *held, now time.Time) (chan<- job, outgoing, <-chan time.Time) {
	if h.pixels == nil {
		_, pixels, err := f.spool.Get(h.kept)
		if err != nil {
			f.refuse(s, h, codes.DataLoss, err.Error())
			return nil, outgoing{}, time.After(time.Millisecond)
		}
		h.pixels = pixels
	}
	j := job{number: f.lastNumber + 1, header: h.timely(now, f.lateAfter, f.live), pixels: h.pixels}
	return f.link.jobs, outgoing{job: j, s: s, f: h}, time.After(time.Second)
}

func (f *feeder) noteSent(o outgoing) {
	f.lastNumber++
	f.unqueue(o.f)
	o.f.sent, o.s.lastSent, f.lastHeard = o.job.number, f.now(), f.now()
	f.byNumber[o.job.number] = sentFrame{o.s, o.f}
	if !o.s.active {
		o.s.active = true
		f.active++
	}
	if o.f.kept != 0 {
		f.release(o.f)
	}
}
