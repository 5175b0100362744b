package raster

import (
	"encoding/binary"
	"fmt"
)

// Pack returns counts (width × height, row by row) as a frame of format f with the
// smallest stride; unused bits are zero. It panics when a size or a count does not
// fit the format: clip first.
func Pack(f PixelFormat, counts []uint16, width, height int) Raw {
	if len(counts) != width*height {
		panic(fmt.Sprintf("raster: %d counts for %d × %d pixels", len(counts), width, height))
	}
	r := NewRaw(f, width, height)
	for y := range height {
		r.PackRow(counts[y*width:(y+1)*width], y)
	}
	return r
}

// PackRow writes counts, Width of them, into row y of Data. It panics as Pack does.
func (r Raw) PackRow(counts []uint16, y int) {
	row := r.rowBytes(len(counts), y)
	limit := r.Format.MaxCount()
	for x, c := range counts {
		if int(c) > limit {
			panic(fmt.Sprintf("raster: count %d at pixel (%d, %d) does not fit %s", c, x, y, r.Format))
		}
	}
	clear(row)
	switch r.Format {
	case Mono8:
		for x, c := range counts {
			row[x] = byte(c)
		}
	case Mono10, Mono12, Mono16:
		for x, c := range counts {
			binary.LittleEndian.PutUint16(row[2*x:], c)
		}
	case Mono10p, Mono12p:
		packLSBFirst(row, counts, r.Format.BitsPerPixel())
	case Mono12Packed:
		packMono12Packed(row, counts)
	}
}

func packLSBFirst(row []byte, counts []uint16, bits int) {
	for x, c := range counts {
		bit := bits * x
		word := uint32(c) << (bit & 7)
		for b := bit >> 3; word != 0; b++ {
			row[b] |= byte(word)
			word >>= 8
		}
	}
}

func packMono12Packed(row []byte, counts []uint16) {
	for x, c := range counts {
		b := row[x/2*3 : x/2*3+3]
		if x%2 == 0 {
			b[0] = byte(c >> 4)
			b[1] |= byte(c & 0x0f)
		} else {
			b[2] = byte(c >> 4)
			b[1] |= byte(c&0x0f) << 4
		}
	}
}
