package files

import (
	"bytes"
	"fmt"
	"image"
	"image/png"
	"io"
	"os"
	"path/filepath"
	"strings"

	"lapgate/pipeline/raster"

	"golang.org/x/image/tiff"
)

// Write writes the frame to path in the format that its extension names: .pgm, .png,
// .tif, .tiff or .raw (see WriteRaw). Pictures hold counts, not camera packing:
// Mono12p comes back from .pgm as Mono12, and from .png and .tif as Mono16 unless the
// reader states the significant bits. The file appears whole or not at all.
func Write(path string, r raster.Raw) error {
	var encode func(io.Writer, raster.Raw) error
	switch ext := strings.ToLower(filepath.Ext(path)); ext {
	case ".pgm":
		encode = EncodePGM
	case ".png":
		encode = EncodePNG
	case ".tif", ".tiff":
		encode = EncodeTIFF
	case ".raw":
		return WriteRaw(path, r)
	default:
		return fmt.Errorf("%s: extension: got %q, want .pgm, .png, .tif, .tiff or .raw", path, ext)
	}
	var out bytes.Buffer
	if err := encode(&out, r); err != nil {
		return fmt.Errorf("%s: %w", path, err)
	}
	return writeWhole(path, out.Bytes())
}

// EncodePNG writes the counts as grey PNG: 8 bits for Mono8, else 16, not scaled.
func EncodePNG(w io.Writer, r raster.Raw) error {
	m, err := greyImage(r)
	if err != nil {
		return err
	}
	return png.Encode(w, m)
}

// EncodeTIFF writes the counts as an uncompressed grey TIFF in which black is zero:
// 8 bits for Mono8, else 16, not scaled.
func EncodeTIFF(w io.Writer, r raster.Raw) error {
	m, err := greyImage(r)
	if err != nil {
		return err
	}
	return tiff.Encode(w, m, nil)
}

func greyImage(r raster.Raw) (image.Image, error) {
	counts, err := r.Counts()
	if err != nil {
		return nil, err
	}
	box := image.Rect(0, 0, r.Width, r.Height)
	if r.Format == raster.Mono8 {
		m := image.NewGray(box)
		for i, c := range counts {
			m.Pix[i] = byte(c)
		}
		return m, nil
	}
	m := image.NewGray16(box)
	for i, c := range counts {
		m.Pix[2*i], m.Pix[2*i+1] = byte(c>>8), byte(c)
	}
	return m, nil
}

// writeWhole writes to a temporary name in the same folder, then renames.
func writeWhole(path string, data []byte) error {
	f, err := os.CreateTemp(filepath.Dir(path), "."+filepath.Base(path)+".*.tmp")
	if err != nil {
		return err
	}
	defer os.Remove(f.Name()) // fails once renamed, as it should
	_, err = f.Write(data)
	if closeErr := f.Close(); err == nil {
		err = closeErr
	}
	if err == nil {
		err = os.Chmod(f.Name(), 0o644)
	}
	if err != nil {
		return err
	}
	return os.Rename(f.Name(), path)
}
