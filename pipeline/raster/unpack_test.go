package raster

import (
	"bytes"
	"encoding/binary"
	"slices"
	"strings"
	"testing"
)

// Codes as in the PFNC value list of the GenICam standard.
func TestFormatCodes(t *testing.T) {
	codes := map[string]uint32{
		"Mono8": 0x01080001, "Mono10": 0x01100003, "Mono10p": 0x010A0046, "Mono12": 0x01100005,
		"Mono12p": 0x010C0047, "Mono12Packed": 0x010C0006, "Mono16": 0x01100007,
	}
	for name, code := range codes {
		f, err := ParsePixelFormat(name)
		if err != nil || uint32(f) != code {
			t.Errorf("%s: got 0x%08X, %v, want 0x%08X", name, uint32(f), err, code)
		}
	}
}

// Worked vectors of the PFNC ("p" is a stream of bits, least significant first) and of
// the older two-pixels-in-three-bytes layout; unpacked words are little endian.
func TestPackingVectors(t *testing.T) {
	cases := []struct {
		format PixelFormat
		counts []uint16
		bytes  []byte
	}{
		{Mono8, []uint16{0x00, 0x7f, 0xff}, []byte{0x00, 0x7f, 0xff}},
		{Mono10, []uint16{0x3ff, 0x001}, []byte{0xff, 0x03, 0x01, 0x00}},
		{Mono12, []uint16{0xabc, 0x123}, []byte{0xbc, 0x0a, 0x23, 0x01}},
		{Mono16, []uint16{0xabcd, 0x0102}, []byte{0xcd, 0xab, 0x02, 0x01}},
		{Mono12p, []uint16{0xabc, 0x123}, []byte{0xbc, 0x3a, 0x12}},
		{Mono12Packed, []uint16{0xabc, 0x123}, []byte{0xab, 0x3c, 0x12}},
		{Mono10p, []uint16{0x3ff, 0x000, 0x155, 0x2aa}, []byte{0xff, 0x03, 0x50, 0x95, 0xaa}},
		{Mono10p, []uint16{0x001, 0x3ff, 0x155, 0x2aa}, []byte{0x01, 0xfc, 0x5f, 0x95, 0xaa}},
		{Mono12p, []uint16{0xabc}, []byte{0xbc, 0x0a}},
		{Mono12Packed, []uint16{0xabc}, []byte{0xab, 0x0c, 0x00}},
		{Mono10p, []uint16{0x3ff}, []byte{0xff, 0x03}},
	}
	for _, c := range cases {
		r := Pack(c.format, c.counts, len(c.counts), 1)
		if !bytes.Equal(r.Data, c.bytes) {
			t.Errorf("%s %x: packed to % x, want % x", c.format, c.counts, r.Data, c.bytes)
		}
		got, err := Raw{Format: c.format, Width: len(c.counts), Height: 1, Stride: len(c.bytes), Data: c.bytes}.Counts()
		if err != nil || !slices.Equal(got, c.counts) {
			t.Errorf("%s % x: unpacked to %x, %v, want %x", c.format, c.bytes, got, err, c.counts)
		}
	}
}

func TestRowStartsOnByteAndStrideIsSkipped(t *testing.T) {
	r := Raw{Format: Mono10p, Width: 1, Height: 2, Stride: 3, Data: []byte{0x55, 0x01, 0xee, 0xaa, 0x02, 0xee}}
	p, err := r.Plane()
	if err != nil {
		t.Fatal(err)
	}
	if p.At(0, 0) != 0x155 || p.At(0, 1) != 0x2aa {
		t.Errorf("got %v, want [341 682]", p.Pix)
	}
}

func TestPlaneRefusesUnusedHighBits(t *testing.T) {
	r := NewRaw(Mono12, 3, 2)
	binary.LittleEndian.PutUint16(r.Data[r.Stride+2*2:], 4096)
	_, planeErr := r.Plane()
	_, countsErr := r.Counts()
	for _, err := range []error{planeErr, countsErr, r.CheckCounts()} {
		if err == nil || !strings.Contains(err.Error(), "count 4096 at pixel (2, 1), want at most 4095 for Mono12") {
			t.Errorf("got %v", err)
		}
	}
	r.Format = Mono16
	if err := r.CheckCounts(); err != nil {
		t.Errorf("Mono16: %v", err)
	}
}

func TestPlaneRefusesShortData(t *testing.T) {
	r := NewRaw(Mono12p, 5, 4)
	r.Data = r.Data[:len(r.Data)-1]
	if _, err := r.Plane(); err == nil || !strings.Contains(err.Error(), "got 31 bytes, want 32") {
		t.Errorf("got %v", err)
	}
}

func TestPackPanicsOnCountThatDoesNotFit(t *testing.T) {
	defer func() {
		if recover() == nil {
			t.Error("no panic for 1024 in Mono10p")
		}
	}()
	Pack(Mono10p, []uint16{1024}, 1, 1)
}

func FuzzUnpack(f *testing.F) {
	f.Add(uint8(0), int16(3), int16(2), int16(0), []byte{1, 2, 3, 4, 5, 6})
	f.Add(uint8(4), int16(4), int16(1), int16(1), []byte{0xff, 0x03, 0x50, 0x95, 0xaa, 0})
	f.Add(uint8(6), int16(5), int16(1), int16(0), []byte{1, 2, 3, 4, 5, 6, 7, 8, 9})
	f.Add(uint8(1), int16(1), int16(1), int16(-1), []byte{0xff, 0xff})
	f.Add(uint8(9), int16(-1), int16(0), int16(0), []byte{})
	f.Fuzz(func(t *testing.T, kind uint8, width, height, extra int16, data []byte) {
		format := PixelFormat(kind)
		if int(kind) < len(PixelFormats()) {
			format = PixelFormats()[kind]
		}
		r := Raw{Format: format, Width: int(width), Height: int(height), Data: data}
		r.Stride = format.RowBytes(int(width)) + int(extra)
		counts, err := r.Counts()
		plane, planeErr := r.Plane()
		if (err == nil) != (planeErr == nil) {
			t.Fatalf("Counts: %v, Plane: %v", err, planeErr)
		}
		if err != nil {
			return
		}
		for i, v := range plane.Pix {
			if float32(counts[i]) != v {
				t.Fatalf("pixel %d: count %d, plane %v", i, counts[i], v)
			}
		}
		again, err := Pack(format, counts, r.Width, r.Height).Counts()
		if err != nil || !slices.Equal(again, counts) {
			t.Fatalf("%s: %v after packing again, want %v (%v)", format, again, counts, err)
		}
	})
}
