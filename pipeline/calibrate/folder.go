package calibrate

import (
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// documentName is the file that names all others.
const documentName = "calibration.json"

// Write writes a calibration as the folder dir, which must not exist or be empty:
//
//	calibration.json   what it is for, settings, scale, noise, bad pixels, provenance,
//	                   and name, unit and sha256 of each plane
//	dark.f32           planes as little-endian float32, row by row from the top without
//	stray.f32          gaps; stray and response only where they were taken
//	response.f32
//	*.png              pictures of the planes (0.1 to 99.9 % of the values drawn from
//	                   black to white) and of the bad pixels, to look at
//
// The folder appears whole or not at all.
func Write(dir string, m Made) error {
	if err := checkPlanes(m.Calibration); err != nil {
		return err
	}
	d := documentOf(m)
	hash, err := d.hash()
	if err != nil {
		return err
	}
	if have := m.Calibration.Hash; have != "" && have != hash {
		return pipeline.Invalid("calibration: hash is %s, content gives %s: it was changed after it was made", have, hash)
	}
	d.Hash = hash
	parent := filepath.Dir(filepath.Clean(dir))
	if err := os.MkdirAll(parent, 0o755); err != nil {
		return err
	}
	building, err := os.MkdirTemp(parent, "."+filepath.Base(dir)+".*.tmp")
	if err != nil {
		return err
	}
	defer os.RemoveAll(building) // nothing is there once renamed
	if err := d.writeFiles(building, m.Calibration); err != nil {
		return err
	}
	if err := os.Chmod(building, 0o755); err != nil {
		return err
	}
	if err := os.Rename(building, dir); err != nil {
		if errors.Is(err, fs.ErrExist) {
			return pipeline.Invalid("%s: exists, want a new folder: a calibration is never written over another", dir)
		}
		return err
	}
	return nil
}

func checkPlanes(c *pipeline.Calibration) error {
	if c.Dark == nil {
		return pipeline.Invalid("calibration: no dark plane, want one")
	}
	for name, p := range map[string]*raster.Plane{"dark": c.Dark, "stray": c.Stray, "response": c.Response} {
		if p != nil && (p.Width != c.Capture.Width || p.Height != c.Capture.Height) {
			return pipeline.Invalid("calibration: %s is %d × %d pixels, want %d × %d", name, p.Width, p.Height, c.Capture.Width, c.Capture.Height)
		}
	}
	return nil
}

func (d document) writeFiles(dir string, c *pipeline.Calibration) error {
	for _, p := range d.Planes {
		if err := os.WriteFile(filepath.Join(dir, p.File), planeBytes(p.plane), 0o644); err != nil {
			return err
		}
		if err := writePreview(filepath.Join(dir, p.Name+".png"), p.plane); err != nil {
			return err
		}
	}
	if err := writeBadPixels(filepath.Join(dir, "bad_pixels.png"), c); err != nil {
		return err
	}
	text, err := json.MarshalIndent(d, "", "  ")
	if err != nil {
		return err
	}
	return os.WriteFile(filepath.Join(dir, documentName), append(text, '\n'), 0o644)
}

// Load reads a calibration folder. It refuses one whose content is not what it was
// when it was written; the error names the file.
func Load(dir string) (*pipeline.Calibration, error) {
	m, err := LoadMade(dir)
	return m.Calibration, err
}

// LoadMade is Load with the provenance.
func LoadMade(dir string) (Made, error) {
	path := filepath.Join(dir, documentName)
	text, err := os.ReadFile(path)
	if err != nil {
		return Made{}, err
	}
	d, err := parseDocument(text)
	if err != nil {
		return Made{}, fmt.Errorf("%s: %w", path, err)
	}
	c, err := d.calibration()
	if err != nil {
		return Made{}, fmt.Errorf("%s: %w", path, err)
	}
	for _, p := range d.Planes {
		if err := p.load(dir, c); err != nil {
			return Made{}, fmt.Errorf("%s: %w", filepath.Join(dir, filepath.Base(p.File)), err)
		}
	}
	if c.Dark == nil {
		return Made{}, pipeline.Invalid("%s: planes: dark is missing: calibrate again", path)
	}
	return Made{Calibration: c, Provenance: d.Provenance}, nil
}

func (p planeEntry) load(dir string, c *pipeline.Calibration) error {
	path := filepath.Join(dir, filepath.Base(p.File))
	want := 4 * int64(c.Capture.Width) * int64(c.Capture.Height)
	info, err := os.Stat(path)
	if err != nil {
		return err
	}
	if info.Size() != want {
		return pipeline.Invalid("got %d bytes, want %d for %d × %d float32", info.Size(), want, c.Capture.Width, c.Capture.Height)
	}
	data, err := os.ReadFile(path)
	if err != nil {
		return err
	}
	if sum := sha256.Sum256(data); hex.EncodeToString(sum[:]) != p.SHA256 {
		return pipeline.Invalid("sha256: got %x, want %s: it was changed since it was made; calibrate again", sum, p.SHA256)
	}
	plane, err := planeOf(data, c.Capture.Width, c.Capture.Height, p.Name == "response")
	if err != nil {
		return err
	}
	switch p.Name {
	case "dark":
		c.Dark = plane
	case "stray":
		c.Stray = plane
	case "response":
		c.Response = plane
	default:
		return pipeline.Invalid("plane: got %q, want dark, stray or response", p.Name)
	}
	return nil
}
