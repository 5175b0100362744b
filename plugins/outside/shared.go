package outside

import (
	"errors"
	"fmt"
	"slices"

	"lapgate/proto/stagepb"
)

// errNotShared says that this system has no memory files to share.
var errNotShared = errors.New("shared memory is not supported on this system; pixels travel in messages")

// aligned rounds up to a whole cache line, so that float32 values are aligned.
func aligned(n int) int { return (n + 63) &^ 63 }

func shared(path string, offset uint64, length int, generation uint64) *stagepb.Pixels {
	return &stagepb.Pixels{Where: &stagepb.Pixels_Shared{Shared: &stagepb.SharedBytes{
		Path: path, Offset: offset, Length: uint64(length), Generation: generation}}}
}

// part returns a piece of memory; the error is for one that leaves it.
func part(mem []byte, offset, length uint64) ([]byte, error) {
	size := uint64(len(mem))
	if offset > size || length > size-offset {
		return nil, fmt.Errorf("shared memory: got bytes %d to %d + %d, want within %d", offset, offset, length, size)
	}
	return mem[offset : offset+length : offset+length], nil
}

// fetchCopy fetches pixels that are kept beyond the call.
func (m *mappings) fetchCopy(p *stagepb.Pixels) ([]byte, error) {
	b, err := m.fetch(p)
	return slices.Clone(b), err
}
