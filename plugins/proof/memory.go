package proof

import (
	"fmt"
	"sync"
	"time"

	"lapgate/pipeline"
)

// maxStations bounds what is kept; beyond it the station that was silent longest goes.
const maxStations = 256

// memory keeps the checksums of the last frames of each station and camera.
type memory struct {
	depth int
	mu    sync.Mutex // guards what is below
	at    map[string]*station
	tick  uint64
}

type station struct {
	ring     []seen
	next     int
	counter  uint64
	lastUsed uint64
}

// seen is one frame: its pixels by size and checksum, and the showing it belongs to.
type seen struct {
	size int
	crc  uint32
	showing
}

type showing struct {
	unit     string
	attempt  int
	index    int
	counter  uint64
	captured int64 // ns since 1970
}

func newMemory(depth int) *memory { return &memory{depth: depth, at: map[string]*station{}} }

// look compares a frame with what is kept, keeps it, and returns what speaks against it.
// The same showing again is no repeat: it is inspected a second time.
func (m *memory) look(f pipeline.Frame, step int) string {
	h := f.Header
	s := seenOf(h)
	s.size = len(f.Raw.Data)
	if s.crc == 0 {
		s.crc = pipeline.Checksum(f.Raw.Data)
	}
	m.mu.Lock()
	defer m.mu.Unlock()
	at := m.station(stationKey(h))
	for _, old := range at.ring {
		if old.size != s.size || old.crc != s.crc {
			continue
		}
		if old.showing == s.showing {
			return ""
		}
		return fmt.Sprintf("the frame is repeated: bit for bit the one of unit %s taken at %s", old.unit, time.Unix(0, old.captured).UTC().Format(time.RFC3339Nano))
	}
	at.keep(s, m.depth)
	return at.count(h.FrameCounter, step)
}

func seenOf(h pipeline.FrameHeader) seen {
	return seen{size: h.Stride * h.Height, crc: h.CRC32C, showing: showing{unit: h.Unit, attempt: h.Attempt, index: h.Index, counter: h.FrameCounter, captured: h.Captured.UnixNano()}}
}

// recall keeps frames that a station showed before the program started, oldest first. The
// frame counter is not taken up: the camera went on while nobody looked.
func (m *memory) recall(earlier []pipeline.FrameHeader) {
	m.mu.Lock()
	defer m.mu.Unlock()
	for _, h := range earlier {
		if h.CRC32C != 0 {
			m.station(stationKey(h)).keep(seenOf(h), m.depth)
		}
	}
}

func stationKey(h pipeline.FrameHeader) string { return h.Station + "\x00" + h.CameraID }

func (m *memory) station(key string) *station {
	m.tick++
	s, ok := m.at[key]
	if !ok {
		if len(m.at) >= maxStations {
			m.forget()
		}
		s = &station{}
		m.at[key] = s
	}
	s.lastUsed = m.tick
	return s
}

func (m *memory) forget() {
	oldest, when := "", m.tick
	for key, s := range m.at {
		if s.lastUsed <= when {
			oldest, when = key, s.lastUsed
		}
	}
	delete(m.at, oldest)
}

func (s *station) keep(f seen, depth int) {
	switch {
	case depth == 0:
	case len(s.ring) < depth:
		s.ring = append(s.ring, f)
	default:
		s.ring[s.next] = f
		s.next = (s.next + 1) % depth
	}
}

// count follows the frame counter.
func (s *station) count(counter uint64, step int) string {
	last := s.counter
	s.counter = counter
	want := last + uint64(step)
	switch {
	case step == 0 || counter == 0 || last == 0 || counter == want:
		return ""
	case counter > want:
		return fmt.Sprintf("the frame counter went from %d to %d, want %d: frames were lost in between, and this one may belong to another unit", last, counter, want)
	}
	return fmt.Sprintf("the frame counter went from %d to %d, want %d: the camera started anew, or sends old frames", last, counter, want)
}
