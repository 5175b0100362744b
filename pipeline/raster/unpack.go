package raster

import (
	"encoding/binary"
	"fmt"
)

// UnpackRow writes the counts (DN) of row y to dst, which has Width elements. Words
// of Mono10 and Mono12 come out whole, with any bit above the significant ones:
// CheckCounts refuses such frames. It panics when dst has another length or r is
// smaller than its dimensions say.
func (r Raw) UnpackRow(dst []float32, y int) {
	unpackRow(dst, r.rowBytes(len(dst), y), r.Format)
}

// CountsRow is UnpackRow into whole counts.
func (r Raw) CountsRow(dst []uint16, y int) {
	unpackRow(dst, r.rowBytes(len(dst), y), r.Format)
}

// Plane returns the counts (DN) of all pixels as float32, which holds each of them
// exactly. The error says what is wrong with the dimensions or with the first count
// that is above Format.MaxCount.
func (r Raw) Plane() (*Plane, error) {
	if err := r.Check(); err != nil {
		return nil, err
	}
	p := NewPlane(r.Width, r.Height)
	limit := float32(r.Format.MaxCount())
	for y := range r.Height {
		row := p.Row(y)
		r.UnpackRow(row, y)
		for x, v := range row {
			if v > limit {
				return nil, r.countError(x, y, int(v))
			}
		}
	}
	return p, nil
}

// Counts returns the counts (DN) of all pixels, row by row without gaps. It refuses
// what Plane refuses.
func (r Raw) Counts() ([]uint16, error) {
	if err := r.Check(); err != nil {
		return nil, err
	}
	counts := make([]uint16, r.Width*r.Height)
	limit := r.Format.MaxCount()
	for y := range r.Height {
		row := counts[y*r.Width : (y+1)*r.Width]
		r.CountsRow(row, y)
		for x, v := range row {
			if int(v) > limit {
				return nil, r.countError(x, y, int(v))
			}
		}
	}
	return counts, nil
}

// CheckCounts refuses a frame with a count above Format.MaxCount and names the first
// such pixel. Only Mono10 and Mono12, which have unused high bits, can hold one.
// Dimensions and data size must have passed Check.
func (r Raw) CheckCounts() error {
	if r.Format != Mono10 && r.Format != Mono12 {
		return nil
	}
	limit := uint16(r.Format.MaxCount())
	for y := range r.Height {
		row := r.rowBytes(r.Width, y)
		for x := range r.Width {
			if v := binary.LittleEndian.Uint16(row[2*x:]); v > limit {
				return r.countError(x, y, int(v))
			}
		}
	}
	return nil
}

func (r Raw) countError(x, y, count int) error {
	return fmt.Errorf("data: count %d at pixel (%d, %d), want at most %d for %s: check pixel_format and byte order",
		count, x, y, r.Format.MaxCount(), r.Format)
}

func (r Raw) rowBytes(width, y int) []byte {
	if width != r.Width {
		panic(fmt.Sprintf("raster: row buffer of %d pixels for a frame %d wide", width, r.Width))
	}
	start := y * r.Stride
	return r.Data[start : start+r.Format.RowBytes(r.Width)]
}

func unpackRow[T float32 | uint16](dst []T, row []byte, f PixelFormat) {
	switch f {
	case Mono8:
		for x, b := range row {
			dst[x] = T(b)
		}
	case Mono10, Mono12, Mono16:
		for x := range dst {
			dst[x] = T(binary.LittleEndian.Uint16(row[2*x:]))
		}
	case Mono10p:
		unpackMono10p(dst, row)
	case Mono12p:
		unpackMono12p(dst, row)
	case Mono12Packed:
		unpackMono12Packed(dst, row)
	default:
		panic(fmt.Sprintf("raster: cannot unpack pixel format %s", f))
	}
}

// unpackMono10p reads ten bits a pixel, least significant bit first: pixel x starts
// at bit 10x, so it lies in two bytes whatever its place.
func unpackMono10p[T float32 | uint16](dst []T, row []byte) {
	for x := range dst {
		bit := 10 * x
		word := binary.LittleEndian.Uint16(row[bit>>3:])
		dst[x] = T(word >> (bit & 7) & 0x3ff)
	}
}

// unpackMono12p reads pairs of pixels from three bytes, least significant bit first.
func unpackMono12p[T float32 | uint16](dst []T, row []byte) {
	x := 0
	for ; x+1 < len(dst); x += 2 {
		b := row[x/2*3 : x/2*3+3]
		dst[x] = T(uint16(b[0]) | uint16(b[1]&0x0f)<<8)
		dst[x+1] = T(uint16(b[1]>>4) | uint16(b[2])<<4)
	}
	if x < len(dst) {
		b := row[x/2*3 : x/2*3+2]
		dst[x] = T(uint16(b[0]) | uint16(b[1]&0x0f)<<8)
	}
}

// unpackMono12Packed reads pairs of pixels from three bytes: the high eight bits of
// each in the outer bytes, the low nibbles together in the middle one.
func unpackMono12Packed[T float32 | uint16](dst []T, row []byte) {
	for x := range dst {
		b := row[x/2*3 : x/2*3+3]
		if x%2 == 0 {
			dst[x] = T(uint16(b[0])<<4 | uint16(b[1]&0x0f))
		} else {
			dst[x] = T(uint16(b[2])<<4 | uint16(b[1]>>4))
		}
	}
}
