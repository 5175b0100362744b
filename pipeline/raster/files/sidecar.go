package files

import (
	"bytes"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"lapgate/pipeline/raster"
)

// sidecar is the JSON text beside raw pixels: frame.json beside frame.raw.
type sidecar struct {
	PixelFormat string `json:"pixel_format"` // PFNC name
	Width       int    `json:"width"`        // px
	Height      int    `json:"height"`       // px
	Stride      int    `json:"stride"`       // bytes
}

// WriteRaw writes Data as it is to path, which ends in .raw, and a sidecar with
// pixel_format, width, height and stride beside it, the same name ending in .json.
// Packing and stride are kept.
func WriteRaw(path string, r raster.Raw) error {
	if filepath.Ext(path) != ".raw" {
		return fmt.Errorf("%s: extension: got %q, want .raw", path, filepath.Ext(path))
	}
	if err := r.Check(); err != nil {
		return fmt.Errorf("%s: %w", path, err)
	}
	text, err := json.MarshalIndent(sidecar{r.Format.String(), r.Width, r.Height, r.Stride}, "", "  ")
	if err != nil {
		return err
	}
	if err := writeWhole(path, r.Data); err != nil {
		return err
	}
	return writeWhole(withExt(path, ".json"), append(text, '\n'))
}

func withExt(path, ext string) string { return strings.TrimSuffix(path, filepath.Ext(path)) + ext }

// sidecarOf returns the sidecar that belongs to path: path itself, or the one beside
// a .raw file.
func sidecarOf(path string) (string, bool) {
	switch filepath.Ext(path) {
	case ".json":
		return path, true
	case ".raw":
		name := withExt(path, ".json")
		_, err := os.Stat(name)
		return name, err == nil
	}
	return "", false
}

func readSidecar(path string, o Options) (raster.Raw, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return raster.Raw{}, err
	}
	r, err := parseSidecar(text, o)
	if err != nil {
		return raster.Raw{}, fmt.Errorf("%s: %w", path, err)
	}
	pixels := withExt(path, ".raw")
	info, err := os.Stat(pixels)
	if err != nil {
		return raster.Raw{}, err
	}
	if info.Size() != int64(r.Size()) {
		return raster.Raw{}, fmt.Errorf("%s: got %d bytes, want %d (stride %d × height %d of %s)",
			pixels, info.Size(), r.Size(), r.Stride, r.Height, filepath.Base(path))
	}
	if r.Data, err = os.ReadFile(pixels); err != nil {
		return raster.Raw{}, err
	}
	if err := r.Check(); err != nil {
		return raster.Raw{}, fmt.Errorf("%s: %w", pixels, err)
	}
	if err := r.CheckCounts(); err != nil {
		return raster.Raw{}, fmt.Errorf("%s: %w", pixels, err)
	}
	return r, nil
}

func parseSidecar(text []byte, o Options) (raster.Raw, error) {
	var s sidecar
	d := json.NewDecoder(bytes.NewReader(text))
	d.DisallowUnknownFields()
	if err := d.Decode(&s); err != nil {
		return raster.Raw{}, fmt.Errorf("want pixel_format, width, height and stride: %w", err)
	}
	f, err := raster.ParsePixelFormat(s.PixelFormat)
	if err != nil {
		return raster.Raw{}, err
	}
	r := raster.Raw{Format: f, Width: s.Width, Height: s.Height, Stride: s.Stride}
	if err := r.CheckDimensions(); err != nil {
		return raster.Raw{}, err
	}
	if o.SignificantBits != 0 && o.SignificantBits != f.SignificantBits() {
		return raster.Raw{}, fmt.Errorf("significant bits: got %d stated, want %d as in %s", o.SignificantBits, f.SignificantBits(), f)
	}
	if r.Size() > o.maxBytes() {
		return raster.Raw{}, fmt.Errorf("size: got %d bytes, want at most %d", r.Size(), o.maxBytes())
	}
	return r, nil
}
