package files

import (
	"bytes"
	"fmt"
	"image"
	"image/color"
	"image/jpeg"
	"image/png"

	"lapgate/pipeline/raster"

	"golang.org/x/image/tiff"
)

// deflateRatio is the most that deflate, and with room to spare LZW over its
// 4 096-entry table, can expand a byte (zlib technical details: 1032 : 1).
const deflateRatio = 4096

func decodePNG(data []byte, o Options) (raster.Raw, error) {
	if err := checkPNGDepth(data); err != nil {
		return raster.Raw{}, fmt.Errorf("PNG: %w", err)
	}
	c, err := png.DecodeConfig(bytes.NewReader(data))
	if err == nil {
		err = o.checkConfig(c, data)
	}
	if err != nil {
		return raster.Raw{}, fmt.Errorf("PNG: %w", err)
	}
	m, err := png.Decode(bytes.NewReader(data))
	if err != nil {
		return raster.Raw{}, fmt.Errorf("PNG: %w", err)
	}
	return o.fromImage(m, "PNG")
}

// checkPNGDepth reads bit depth and colour type from the header chunk, which always
// comes first (PNG specification, 11.2.1): std widens fewer than 8 bits silently.
func checkPNGDepth(data []byte) error {
	if len(data) < 26 || string(data[12:16]) != "IHDR" {
		return fmt.Errorf("header chunk: not found in %d bytes", len(data))
	}
	if data[25] == 3 {
		return fmt.Errorf("colour type: got 3 (palette), want grey or true colour")
	}
	if depth := data[24]; depth != 8 && depth != 16 {
		return fmt.Errorf("bit depth: got %d, want 8 or 16", depth)
	}
	return nil
}

func decodeTIFF(data []byte, o Options) (raster.Raw, error) {
	if err := checkTIFF(data); err != nil {
		return raster.Raw{}, fmt.Errorf("TIFF: %w", err)
	}
	c, err := tiff.DecodeConfig(bytes.NewReader(data))
	if err == nil {
		err = o.checkConfig(c, data)
	}
	if err != nil {
		return raster.Raw{}, fmt.Errorf("TIFF: %w", err)
	}
	m, err := tiff.Decode(bytes.NewReader(data))
	if err != nil {
		return raster.Raw{}, fmt.Errorf("TIFF: %w", err)
	}
	return o.fromImage(m, "TIFF")
}

func decodeJPEG(data []byte, o Options) (raster.Raw, error) {
	c, err := jpeg.DecodeConfig(bytes.NewReader(data))
	if err == nil {
		// A progressive picture keeps its coefficients: four bytes for each sample
		// of up to three components beside the samples themselves.
		err = o.checkSize(c.Width, c.Height, 16)
	}
	if err != nil {
		return raster.Raw{}, fmt.Errorf("JPEG: %w", err)
	}
	m, err := jpeg.Decode(bytes.NewReader(data))
	if err != nil {
		return raster.Raw{}, fmt.Errorf("JPEG: %w", err)
	}
	return o.fromImage(m, "JPEG")
}

// checkConfig refuses a size that takes too much memory, or that the file is too
// short to hold however well it is packed.
func (o Options) checkConfig(c image.Config, data []byte) error {
	bytesPerPixel := 4
	switch c.ColorModel {
	case color.GrayModel:
		bytesPerPixel = 1
	case color.Gray16Model:
		bytesPerPixel = 2
	case color.RGBA64Model, color.NRGBA64Model:
		bytesPerPixel = 8
	}
	if err := o.checkSize(c.Width, c.Height, bytesPerPixel); err != nil {
		return err
	}
	if c.Width*c.Height > deflateRatio*len(data) {
		return fmt.Errorf("data: %d bytes cannot hold %d × %d pixels: file cut short", len(data), c.Width, c.Height)
	}
	return nil
}

// fromImage turns a decoded picture into a frame.
func (o Options) fromImage(m image.Image, kind string) (raster.Raw, error) {
	size := m.Bounds().Size()
	var counts []uint16
	bits := 8
	var err error
	switch m := m.(type) {
	case *image.Gray:
		counts = grey8(m)
	case *image.Gray16:
		counts, bits = grey16(m), 16
	default:
		counts, bits, err = o.greyOfColour(m)
	}
	if err == nil {
		var r raster.Raw
		if r, err = o.frame(counts, size.X, size.Y, bits); err == nil {
			return r, nil
		}
	}
	return raster.Raw{}, fmt.Errorf("%s: %w", kind, err)
}

func grey8(m *image.Gray) []uint16 {
	size := m.Bounds().Size()
	counts := make([]uint16, 0, size.X*size.Y)
	for y := range size.Y {
		for _, v := range m.Pix[y*m.Stride : y*m.Stride+size.X] {
			counts = append(counts, uint16(v))
		}
	}
	return counts
}

func grey16(m *image.Gray16) []uint16 {
	size := m.Bounds().Size()
	counts := make([]uint16, 0, size.X*size.Y)
	for y := range size.Y {
		row := m.Pix[y*m.Stride : y*m.Stride+2*size.X]
		for x := range size.X {
			counts = append(counts, uint16(row[2*x])<<8|uint16(row[2*x+1]))
		}
	}
	return counts
}
