package spool

import (
	"encoding/binary"
	"encoding/json"
	"fmt"
	"hash/crc32"
	"io"
	"time"

	"lapgate/pipeline"
)

// Entry is what is kept of a frame beside its pixels.
type Entry struct {
	Header pipeline.FrameHeader `json:"header"`
	Source string               `json:"source"` // the file that the frame came from; empty = none
	Taken  time.Time            `json:"taken"`  // when the frame was read
}

// The layout of a file, all numbers little-endian: magic, length of the entry as JSON
// (4 bytes), length of the pixels (8 bytes), JSON, pixels, CRC-32C of everything
// before it (4 bytes). The magic's last digit is the format's version.
const (
	magic      = "LGSPOOL1"
	prefixSize = len(magic) + 4 + 8
	maxEntry   = 1 << 20 // bytes of JSON
	trailer    = 4
)

func castagnoli() *crc32.Table { return crc32.MakeTable(crc32.Castagnoli) }

// encode writes an entry and its pixels.
func encode(w io.Writer, e Entry, pixels []byte) error {
	text, err := json.Marshal(e)
	if err != nil {
		return err
	}
	if len(text) > maxEntry {
		return pipeline.Invalid("spool: header takes %d bytes, want at most %d", len(text), maxEntry)
	}
	prefix := append(make([]byte, 0, prefixSize), magic...)
	prefix = binary.LittleEndian.AppendUint32(prefix, uint32(len(text)))
	prefix = binary.LittleEndian.AppendUint64(prefix, uint64(len(pixels)))
	sum := crc32.New(castagnoli())
	both := io.MultiWriter(w, sum)
	for _, part := range [][]byte{prefix, text, pixels} {
		if _, err := both.Write(part); err != nil {
			return err
		}
	}
	_, err = w.Write(binary.LittleEndian.AppendUint32(nil, sum.Sum32()))
	return err
}

// sizeOf returns the bytes that encode will write, but for the JSON's own length.
func sizeOf(pixels int) int64 { return int64(prefixSize + pixels + trailer) }

// lengthsOf reads the prefix of a file.
func lengthsOf(prefix []byte) (text, pixels uint64, err error) {
	if len(prefix) < prefixSize || string(prefix[:len(magic)]) != magic {
		return 0, 0, fmt.Errorf("spool file: starts with %q, want %q and two lengths", prefix[:min(len(prefix), prefixSize)], magic)
	}
	text = uint64(binary.LittleEndian.Uint32(prefix[len(magic):]))
	if text > maxEntry {
		return 0, 0, fmt.Errorf("spool file: header of %d bytes, want at most %d", text, maxEntry)
	}
	return text, binary.LittleEndian.Uint64(prefix[len(magic)+4:]), nil
}

// decode reads what encode wrote. It refuses anything cut, longer or altered.
func decode(file []byte) (Entry, []byte, error) {
	text, pixels, err := lengthsOf(file)
	if err != nil {
		return Entry{}, nil, err
	}
	have := uint64(max(0, len(file)-prefixSize-trailer))
	if pixels > have || text+pixels != have || len(file) < prefixSize+trailer {
		return Entry{}, nil, fmt.Errorf("spool file: got %d bytes of header and pixels, want %d + %d", have, text, pixels)
	}
	body, sum := file[:len(file)-trailer], binary.LittleEndian.Uint32(file[len(file)-trailer:])
	if got := crc32.Checksum(body, castagnoli()); got != sum {
		return Entry{}, nil, fmt.Errorf("spool file: checksum 0x%08x over its content, want 0x%08x", got, sum)
	}
	e, err := decodeEntry(body[prefixSize : prefixSize+int(text)])
	return e, body[prefixSize+int(text):], err
}

func decodeEntry(text []byte) (Entry, error) {
	var e Entry
	if err := json.Unmarshal(text, &e); err != nil {
		return Entry{}, fmt.Errorf("spool file: header: %w", err)
	}
	return e, nil
}

// decodeHead reads an entry without the pixels behind it.
func decodeHead(r io.Reader) (Entry, error) {
	prefix := make([]byte, prefixSize)
	if _, err := io.ReadFull(r, prefix); err != nil {
		return Entry{}, fmt.Errorf("spool file: %w", err)
	}
	size, _, err := lengthsOf(prefix)
	if err != nil {
		return Entry{}, err
	}
	text := make([]byte, size)
	if _, err := io.ReadFull(r, text); err != nil {
		return Entry{}, fmt.Errorf("spool file: %w", err)
	}
	return decodeEntry(text)
}
