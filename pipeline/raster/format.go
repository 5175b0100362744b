package raster

import (
	"fmt"
	"sort"
	"strconv"
	"strings"
)

// PixelFormat is a 32-bit code of the Pixel Format Naming Convention (PFNC):
// 0x01 for monochrome, then the bits a pixel occupies, then a 16-bit id.
type PixelFormat uint32

// The monochrome formats that are understood. "p" is PFNC's dense packing (least
// significant bit first); "Packed" is the older layout of two pixels in three bytes
// that shares its middle byte.
const (
	Mono8        PixelFormat = 0x01080001
	Mono10       PixelFormat = 0x01100003
	Mono12       PixelFormat = 0x01100005
	Mono16       PixelFormat = 0x01100007
	Mono10p      PixelFormat = 0x010A0046
	Mono12p      PixelFormat = 0x010C0047
	Mono12Packed PixelFormat = 0x010C0006
)

type formatFacts struct {
	name        string
	significant int // bits of a count that carry information
}

func facts(f PixelFormat) (formatFacts, bool) {
	switch f {
	case Mono8:
		return formatFacts{"Mono8", 8}, true
	case Mono10:
		return formatFacts{"Mono10", 10}, true
	case Mono12:
		return formatFacts{"Mono12", 12}, true
	case Mono16:
		return formatFacts{"Mono16", 16}, true
	case Mono10p:
		return formatFacts{"Mono10p", 10}, true
	case Mono12p:
		return formatFacts{"Mono12p", 12}, true
	case Mono12Packed:
		return formatFacts{"Mono12Packed", 12}, true
	}
	return formatFacts{}, false
}

// PixelFormats lists the formats that are understood, in a fixed order.
func PixelFormats() []PixelFormat {
	return []PixelFormat{Mono8, Mono10, Mono12, Mono16, Mono10p, Mono12p, Mono12Packed}
}

// ParsePixelFormat returns the format of a PFNC name such as "Mono12p".
func ParsePixelFormat(name string) (PixelFormat, error) {
	var have []string
	for _, f := range PixelFormats() {
		if f.String() == name {
			return f, nil
		}
		have = append(have, f.String())
	}
	sort.Strings(have)
	return 0, fmt.Errorf("pixel format %q: want one of %s", name, strings.Join(have, ", "))
}

// String returns the PFNC name, or the code in hexadecimal where it is not understood.
func (f PixelFormat) String() string {
	if k, ok := facts(f); ok {
		return k.name
	}
	return fmt.Sprintf("0x%08X", uint32(f))
}

// Known reports whether the format is understood.
func (f PixelFormat) Known() bool { _, ok := facts(f); return ok }

// SignificantBits returns how many bits of a count carry information (8, 10, 12 or 16).
func (f PixelFormat) SignificantBits() int { k, _ := facts(f); return k.significant }

// MaxCount returns the largest count a pixel can hold: 2^SignificantBits − 1.
func (f PixelFormat) MaxCount() int { return 1<<f.SignificantBits() - 1 }

// BitsPerPixel returns the bits a pixel occupies in memory.
func (f PixelFormat) BitsPerPixel() int { return int(f>>16) & 0xff }

// RowBytes returns the bytes of one row of width pixels. A row starts and ends on a
// whole byte in every format; Mono12Packed rounds up to whole three-byte pairs.
func (f PixelFormat) RowBytes(width int) int {
	if f == Mono12Packed {
		return (width + 1) / 2 * 3
	}
	return (width*f.BitsPerPixel() + 7) / 8
}

// MarshalText writes the PFNC name.
func (f PixelFormat) MarshalText() ([]byte, error) { return []byte(f.String()), nil }

// UnmarshalText reads what MarshalText writes: a PFNC name, or the code of a format
// that is not understood.
func (f *PixelFormat) UnmarshalText(b []byte) error {
	if code, err := strconv.ParseUint(string(b), 0, 32); err == nil {
		*f = PixelFormat(code)
		return nil
	}
	g, err := ParsePixelFormat(string(b))
	if err == nil {
		*f = g
	}
	return err
}
