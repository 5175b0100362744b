package files

import (
	"bytes"
	"encoding/binary"
	"hash/crc32"
	"slices"
	"strings"
	"testing"

	"lapgate/pipeline/raster"
)

func crcIEEE(b []byte) uint32 { return crc32.ChecksumIEEE(b) }

// tiffOf builds a one-strip uncompressed grey file by TIFF 6.0, section 4.
func tiffOf(order binary.ByteOrder, photometric, bits, width uint32, next uint32, pixels []byte) []byte {
	mark := "II"
	if order == binary.BigEndian {
		mark = "MM"
	}
	var b bytes.Buffer
	b.WriteString(mark)
	w := func(v any) { _ = binary.Write(&b, order, v) }
	w(uint16(42))
	w(uint32(8))
	entries := [][2]uint32{{256, width}, {257, 1}, {258, bits}, {259, 1}, {262, photometric}, {273, 8 + 2 + 9*12 + 4}, {277, 1}, {278, 1}, {279, uint32(len(pixels))}}
	w(uint16(len(entries)))
	for _, e := range entries {
		w(uint16(e[0]))
		w(uint16(3)) // SHORT
		w(uint32(1))
		w(uint16(e[1]))
		w(uint16(0))
	}
	w(next)
	b.Write(pixels)
	return b.Bytes()
}

func TestTIFFPhotometricAndByteOrder(t *testing.T) {
	cases := []struct {
		name   string
		data   []byte
		format raster.PixelFormat
		counts []uint16
	}{
		{"black is zero, little endian", tiffOf(binary.LittleEndian, 1, 16, 2, 0, []byte{0x34, 0x12, 0xff, 0xff}), raster.Mono16, []uint16{0x1234, 0xffff}},
		{"black is zero, big endian", tiffOf(binary.BigEndian, 1, 16, 2, 0, []byte{0x12, 0x34, 0xff, 0xff}), raster.Mono16, []uint16{0x1234, 0xffff}},
		{"white is zero, 16 bits", tiffOf(binary.LittleEndian, 0, 16, 2, 0, []byte{0x34, 0x12, 0xff, 0xff}), raster.Mono16, []uint16{0xffff - 0x1234, 0}},
		{"white is zero, 8 bits", tiffOf(binary.LittleEndian, 0, 8, 2, 0, []byte{0, 200}), raster.Mono8, []uint16{255, 55}},
	}
	for _, c := range cases {
		r, err := Decode(bytes.NewReader(c.data), Options{})
		if err != nil || r.Format != c.format || !slices.Equal(mustCounts(t, r), c.counts) {
			t.Errorf("%s: got %s % x, %v, want %s %x", c.name, r.Format, r.Data, err, c.format, c.counts)
		}
	}
}

func TestTIFFRefusals(t *testing.T) {
	for want, data := range map[string][]byte{
		"bits per sample: got 1, want 8 or 16": tiffOf(binary.LittleEndian, 1, 1, 8, 0, []byte{0xff}),
		"bits per sample: got 4, want 8 or 16": tiffOf(binary.BigEndian, 1, 4, 2, 0, []byte{0xff}),
		"several pictures":                     tiffOf(binary.LittleEndian, 1, 8, 1, 8, []byte{0xff}),
		"cut short":                            []byte("II*\x00"),
		"directory":                            []byte("II*\x00\xff\xff\xff\xff"),
	} {
		_, err := Decode(bytes.NewReader(data), Options{})
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, want ...%s...", err, want)
		}
	}
}

func FuzzRead(f *testing.F) {
	for _, text := range []string{"P5\n2 1\n255\n\x07\xff", "P2\n2 2\n4095\n0 17\n 4095\t3\n", "P5\n1 1\n1023\n\x03\xff"} {
		f.Add([]byte(text), 0, 0)
	}
	f.Add(tiffOf(binary.LittleEndian, 0, 16, 2, 0, []byte{1, 2, 3, 4}), 12, 0)
	for _, format := range []raster.PixelFormat{raster.Mono8, raster.Mono12} {
		var p, t bytes.Buffer
		_ = EncodePNG(&p, randomFrame(format, 5, 3))
		_ = EncodeTIFF(&t, randomFrame(format, 5, 3))
		f.Add(p.Bytes(), 0, 1)
		f.Add(t.Bytes(), 0, 1)
	}
	f.Fuzz(func(t *testing.T, data []byte, bits, colour int) {
		r, err := Decode(bytes.NewReader(data), Options{SignificantBits: bits, Colour: ColourRule(colour), MaxBytes: 1 << 20})
		if err != nil {
			return
		}
		var b bytes.Buffer
		if err := EncodePGM(&b, r); err != nil {
			t.Fatal(err)
		}
		again, err := Decode(&b, Options{})
		if err != nil || again.Format != r.Format || !bytes.Equal(again.Data, r.Data) {
			t.Fatalf("%s %d × %d after another round: %v", r.Format, r.Width, r.Height, err)
		}
	})
}
