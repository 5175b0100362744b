package outside

import (
	"fmt"
	"os"

	"golang.org/x/sys/unix"
)

// ring is a memory file of equal slots that host and stage share.
type ring struct {
	file *os.File
	mem  []byte // as the host has it mapped
	slot int64  // bytes
}

// newInput returns a ring that the host writes and nobody else can: the seals come after
// the host's own mapping.
func newInput(slots int, slot int64) (*ring, error) {
	return newRing("lapgate-input", slots, slot, unix.PROT_READ|unix.PROT_WRITE, unix.F_SEAL_FUTURE_WRITE)
}

// newOutput returns a ring that the stage writes and the host only reads.
func newOutput(slots int, slot int64) (*ring, error) {
	return newRing("lapgate-output", slots, slot, unix.PROT_READ, 0)
}

func newRing(name string, slots int, slot int64, protection, seals int) (*ring, error) {
	slot = (slot + 4095) &^ 4095
	fd, err := unix.MemfdCreate(name, unix.MFD_CLOEXEC|unix.MFD_ALLOW_SEALING)
	if err != nil {
		return nil, fmt.Errorf("memory file: %w", err)
	}
	r := &ring{file: os.NewFile(uintptr(fd), name), slot: slot}
	size := slot * int64(slots)
	if err := unix.Ftruncate(fd, size); err != nil {
		r.close()
		return nil, fmt.Errorf("memory file of %d bytes: %w", size, err)
	}
	if r.mem, err = unix.Mmap(fd, 0, int(size), protection, unix.MAP_SHARED); err != nil {
		r.close()
		return nil, fmt.Errorf("memory file of %d bytes: %w", size, err)
	}
	seals |= unix.F_SEAL_SHRINK | unix.F_SEAL_GROW | unix.F_SEAL_SEAL
	if _, err := unix.FcntlInt(uintptr(fd), unix.F_ADD_SEALS, seals); err != nil {
		r.close()
		return nil, fmt.Errorf("memory file: seals %#x: %w", seals, err)
	}
	return r, nil
}

// slotAt returns the memory of slot i.
func (r *ring) slotAt(i int) []byte {
	return r.mem[int64(i)*r.slot : int64(i+1)*r.slot : int64(i+1)*r.slot]
}

// close unmaps and closes; nobody may use a slot any more.
func (r *ring) close() {
	if r == nil {
		return
	}
	if r.mem != nil {
		_ = unix.Munmap(r.mem)
	}
	r.file.Close()
}
