package outside

import (
	"fmt"
	"os"
	"sync"

	"golang.org/x/sys/unix"

	"lapgate/proto/stagepb"
)

// mappings are the memory files of the host as the stage's process sees them, each
// mapped once.
type mappings struct {
	mu    sync.Mutex
	files map[string][]byte
}

// view returns the memory of a file. It refuses one that could shrink: reading past its
// end would kill the process.
func (m *mappings) view(path string, protection int) ([]byte, error) {
	m.mu.Lock()
	defer m.mu.Unlock()
	if mem, ok := m.files[path]; ok {
		return mem, nil
	}
	mode := os.O_RDONLY
	if protection&unix.PROT_WRITE != 0 {
		mode = os.O_RDWR
	}
	f, err := os.OpenFile(path, mode, 0)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	seals, err := unix.FcntlInt(f.Fd(), unix.F_GET_SEALS, 0)
	if err != nil || seals&unix.F_SEAL_SHRINK == 0 {
		return nil, fmt.Errorf("%s: a memory file that can shrink (seals %#x, %v); want it sealed", path, seals, err)
	}
	info, err := f.Stat()
	if err != nil {
		return nil, err
	}
	mem, err := unix.Mmap(int(f.Fd()), 0, int(info.Size()), protection, unix.MAP_SHARED)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	if m.files == nil {
		m.files = map[string][]byte{}
	}
	m.files[path] = mem
	return mem, nil
}

// fetch implements stagepb.Fetch without a copy. The pixels are read only.
func (m *mappings) fetch(p *stagepb.Pixels) ([]byte, error) {
	s := p.GetShared()
	if s == nil {
		return stagepb.FromMessage(p)
	}
	mem, err := m.view(s.GetPath(), unix.PROT_READ)
	if err != nil {
		return nil, err
	}
	return part(mem, s.GetOffset(), s.GetLength())
}

// packer writes planes to the slot given, and into the message what does not fit.
func (m *mappings) packer(out *stagepb.SharedBytes) stagepb.Pack {
	if out == nil {
		return stagepb.InMessage
	}
	used := 0
	return func(data []byte) (*stagepb.Pixels, error) {
		mem, err := m.view(out.GetPath(), unix.PROT_READ|unix.PROT_WRITE)
		if err != nil {
			return nil, err
		}
		slot, err := part(mem, out.GetOffset(), out.GetLength())
		if err != nil {
			return nil, err
		}
		if used+len(data) > len(slot) {
			return stagepb.InMessage(data)
		}
		copy(slot[used:], data)
		p := shared(out.GetPath(), out.GetOffset()+uint64(used), len(data), out.GetGeneration())
		used += aligned(len(data))
		return p, nil
	}
}
