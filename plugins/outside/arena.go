package outside

import (
	"errors"
	"sync"
	"unsafe"
)

// Arena is memory for frames that stages outside see where it lies, read only: a frame in
// it is sent to them without a copy. It is an Allocator, for whoever receives frames, and
// safe for concurrent use. Memory of it is never given back; it is for buffers that are
// used again.
type Arena struct {
	ring *ring // nil: this system shares no memory

	mu   sync.Mutex // guards used
	used int
}

// NewArena returns one of the size given; the system takes the memory as it is used. Where
// memory cannot be shared it is an Arena that has none.
func NewArena(bytes int64) (*Arena, error) {
	r, err := newInput(1, bytes)
	if errors.Is(err, errNotShared) {
		return &Arena{}, nil
	}
	return &Arena{ring: r}, err
}

// Allocate returns n bytes: of the arena, or of Go's own memory where that has no room.
func (a *Arena) Allocate(n int) []byte {
	if a.ring == nil {
		return make([]byte, n)
	}
	a.mu.Lock()
	defer a.mu.Unlock()
	mem := a.ring.slotAt(0)
	if n > len(mem)-a.used {
		return make([]byte, n)
	}
	from := a.used
	a.used += aligned(n)
	a.used = min(a.used, len(mem))
	return mem[from : from+n : from+n]
}

// offset returns where in the arena bytes lie; false where they do not.
func (a *Arena) offset(data []byte) (uint64, bool) {
	if a == nil || a.ring == nil || len(data) == 0 {
		return 0, false
	}
	mem := a.ring.slotAt(0)
	at, base := uintptr(unsafe.Pointer(unsafe.SliceData(data))), uintptr(unsafe.Pointer(unsafe.SliceData(mem)))
	if at < base || at-base > uintptr(len(mem)) || uintptr(len(data)) > uintptr(len(mem))-(at-base) {
		return 0, false
	}
	return uint64(at - base), true
}

// bytes is how much the arena can hold.
func (a *Arena) bytes() int64 {
	if a == nil || a.ring == nil {
		return 0
	}
	return a.ring.slot
}

// Close frees the memory. Nobody may use a frame of it any more.
func (a *Arena) Close() {
	if a != nil {
		a.ring.close()
		a.ring = nil
	}
}
