package files

import (
	"encoding/binary"
	"errors"
	"fmt"
)

// checkTIFF reads the first directory of a TIFF 6.0 file (section 2) far enough to
// refuse what the decoder would change silently: fewer than 8 bits a sample, and
// further pictures, which would be dropped.
func checkTIFF(data []byte) error {
	var order binary.ByteOrder = binary.LittleEndian
	if data[0] == 'M' {
		order = binary.BigEndian
	}
	if len(data) < 8 {
		return errors.New("header: file cut short")
	}
	at := uint64(order.Uint32(data[4:]))
	if at+2 > uint64(len(data)) {
		return fmt.Errorf("directory: at byte %d of a file of %d", at, len(data))
	}
	entries := uint64(order.Uint16(data[at:]))
	end := at + 2 + 12*entries
	if end+4 > uint64(len(data)) {
		return fmt.Errorf("directory: %d entries end after the file of %d bytes", entries, len(data))
	}
	if next := order.Uint32(data[end:]); next != 0 {
		return errors.New("several pictures in the file, want one: save each frame in its own file")
	}
	return checkTIFFBits(data[at+2:end], order)
}

// checkTIFFBits looks at tag 258, BitsPerSample. One or two short values stand in the
// entry itself; for more there is an offset, and the decoder checks them.
func checkTIFFBits(directory []byte, order binary.ByteOrder) error {
	const bitsPerSample = 258
	for e := directory; len(e) >= 12; e = e[12:] {
		if order.Uint16(e) != bitsPerSample {
			continue
		}
		if count := order.Uint32(e[4:]); count != 1 {
			return nil
		}
		if bits := order.Uint16(e[8:]); bits != 8 && bits != 16 {
			return fmt.Errorf("bits per sample: got %d, want 8 or 16", bits)
		}
		return nil
	}
	return errors.New("bits per sample: not given, which means 1; want 8 or 16")
}
