package files

import (
	"fmt"

	"lapgate/pipeline/raster"
)

// ColourRule says what becomes of a picture with red, green and blue.
type ColourRule int

// The rules. Each works on the sample values as stored, without undoing any transfer
// curve.
const (
	ColourRefuse  ColourRule = iota // an error: the default
	ColourLuma                      // Rec. ITU-R BT.601-7, 2.5.1: 0.299 R + 0.587 G + 0.114 B, rounded half up
	ColourLuma709                   // Rec. ITU-R BT.709-6, 3.2: 0.2126 R + 0.7152 G + 0.0722 B, rounded half up
	ColourRed
	ColourGreen
	ColourBlue
)

// DefaultMaxBytes is how large a decoded picture may be where Options do not say: 512 MiB.
const DefaultMaxBytes = 512 << 20

// Options say how a file is to be read. The zero value is the strictest.
type Options struct {
	Colour          ColourRule
	SignificantBits int // 8, 10, 12 or 16 bits of a count carry information; 0 = as the file says
	MaxBytes        int // of the decoded picture, refused before memory is taken; 0 = DefaultMaxBytes
}

func (o Options) check() error {
	switch o.SignificantBits {
	case 0, 8, 10, 12, 16:
	default:
		return fmt.Errorf("significant bits: got %d, want 8, 10, 12 or 16, or 0 for what the file says", o.SignificantBits)
	}
	if o.Colour < ColourRefuse || o.Colour > ColourBlue {
		return fmt.Errorf("colour rule: got %d, want one of the rules of package files", o.Colour)
	}
	return nil
}

func (o Options) maxBytes() int {
	if o.MaxBytes > 0 {
		return o.MaxBytes
	}
	return DefaultMaxBytes
}

// checkSize refuses a picture that is empty, too long on a side, or too large to be
// decoded at bytesPerPixel.
func (o Options) checkSize(width, height, bytesPerPixel int) error {
	if width < 1 || height < 1 || width > raster.MaxSide || height > raster.MaxSide {
		return fmt.Errorf("size: got %d × %d pixels, want 1 to %d on each side", width, height, raster.MaxSide)
	}
	if need := width * height * bytesPerPixel; need > o.maxBytes() {
		return fmt.Errorf("size: %d × %d pixels take %d bytes to decode, want at most %d", width, height, need, o.maxBytes())
	}
	return nil
}

// wordFormat returns the unpacked format with the given significant bits.
func wordFormat(bits int) raster.PixelFormat {
	switch bits {
	case 8:
		return raster.Mono8
	case 10:
		return raster.Mono10
	case 12:
		return raster.Mono12
	}
	return raster.Mono16
}

// frame packs counts in the format that the file or, before it, the options call for,
// and refuses a count that this format cannot hold.
func (o Options) frame(counts []uint16, width, height, fileBits int) (raster.Raw, error) {
	bits := fileBits
	if o.SignificantBits > fileBits {
		return raster.Raw{}, fmt.Errorf("significant bits: got %d stated, want at most the %d that the file holds", o.SignificantBits, fileBits)
	}
	if o.SignificantBits != 0 {
		bits = o.SignificantBits
	}
	format := wordFormat(bits)
	limit := uint16(format.MaxCount())
	for i, c := range counts {
		if c > limit {
			return raster.Raw{}, fmt.Errorf("count %d at pixel (%d, %d), want at most %d for %d significant bits: state more bits",
				c, i%width, i/width, limit, bits)
		}
	}
	return raster.Pack(format, counts, width, height), nil
}
