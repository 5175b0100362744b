package files

import (
	"errors"
	"fmt"
	"image"
	"image/color"
)

// greyOfColour reduces a colour picture to one count a pixel by the rule and returns
// the bits of its samples.
func (o Options) greyOfColour(m image.Image) ([]uint16, int, error) {
	bits, err := sampleBits(m)
	if err != nil {
		return nil, 0, err
	}
	if o.Colour == ColourRefuse {
		return nil, 0, errors.New("colour: got red, green and blue, want grey; state a colour rule (luma, red, green or blue)")
	}
	if f, ok := m.(interface{ Opaque() bool }); ok && !f.Opaque() {
		return nil, 0, errors.New("alpha: got pixels that are not opaque, want none: save without transparency")
	}
	b := m.Bounds()
	counts := make([]uint16, 0, b.Dx()*b.Dy())
	for y := b.Min.Y; y < b.Max.Y; y++ {
		for x := b.Min.X; x < b.Max.X; x++ {
			r, g, b := samples(m, x, y, bits)
			counts = append(counts, o.Colour.count(r, g, b))
		}
	}
	return counts, bits, nil
}

func sampleBits(m image.Image) (int, error) {
	switch m.(type) {
	case *image.RGBA, *image.NRGBA, *image.YCbCr:
		return 8, nil
	case *image.RGBA64, *image.NRGBA64:
		return 16, nil
	case *image.Paletted:
		return 0, errors.New("colour: got a palette, want grey or red, green and blue")
	case *image.CMYK:
		return 0, errors.New("colour: got CMYK, want grey or red, green and blue")
	}
	return 0, fmt.Errorf("colour: got %T, want grey or red, green and blue", m)
}

// samples returns the stored values of an opaque pixel. At 8 bits, std widens v to
// v·257, so the high byte is v.
func samples(m image.Image, x, y, bits int) (r, g, b uint32) {
	switch m := m.(type) {
	case *image.YCbCr: // by JFIF's conversion, each of the three clipped to 0…255
		c := m.YCbCrAt(x, y)
		r8, g8, b8 := color.YCbCrToRGB(c.Y, c.Cb, c.Cr)
		return uint32(r8), uint32(g8), uint32(b8)
	default:
		r, g, b, _ = m.At(x, y).RGBA()
	}
	shift := 16 - bits
	return r >> shift, g >> shift, b >> shift
}

func (c ColourRule) count(r, g, b uint32) uint16 {
	switch c {
	case ColourLuma:
		return uint16((299*r + 587*g + 114*b + 500) / 1000)
	case ColourLuma709:
		return uint16((2126*r + 7152*g + 722*b + 5000) / 10000)
	case ColourRed:
		return uint16(r)
	case ColourGreen:
		return uint16(g)
	}
	return uint16(b)
}
