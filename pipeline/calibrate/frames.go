package calibrate

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"iter"
	"os"
	"path/filepath"
	"strings"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/files"
)

// Frame is one frame that goes into a calibration.
type Frame struct {
	Name    string           // of its file, for messages and provenance
	Capture pipeline.Capture // settings; format and size are taken from Raw
	SensorC *float64         // °C, where the camera says
	Raw     raster.Raw
}

// SourceFrame says which frame went into a calibration.
type SourceFrame struct {
	Kind   string `json:"kind"`   // dark, stray or response
	File   string `json:"file"`   // name without folder
	SHA256 string `json:"sha256"` // of the pixel bytes, hexadecimal
	CRC32C string `json:"crc32c"` // of the same, as in a frame's header
}

func sourceFrame(kind string, f Frame) SourceFrame {
	sum := sha256.Sum256(f.Raw.Data)
	return SourceFrame{
		Kind: kind, File: filepath.Base(f.Name), SHA256: hex.EncodeToString(sum[:]),
		CRC32C: fmt.Sprintf("%08x", pipeline.Checksum(f.Raw.Data)),
	}
}

// Frames yields the frames given.
func Frames(list ...Frame) iter.Seq2[Frame, error] {
	return func(yield func(Frame, error) bool) {
		for _, f := range list {
			if !yield(f, nil) {
				return
			}
		}
	}
}

// Folder yields the frames in dir in the order of their names, one in memory at a
// time. Hidden files and .json files are no frames; every other file must be one.
// stated are the camera's settings; a file capture.json in dir, with any of
// exposure_us, gain_db, black_level, offset_x, offset_y, binning_x and binning_y, says
// where the frames of this folder differ from them.
func Folder(dir string, stated pipeline.Capture, o files.Options) iter.Seq2[Frame, error] {
	return func(yield func(Frame, error) bool) {
		entries, err := os.ReadDir(dir)
		if err != nil {
			yield(Frame{}, err)
			return
		}
		capture, err := folderCapture(dir, stated)
		if err != nil {
			yield(Frame{}, err)
			return
		}
		for _, e := range entries {
			name := e.Name()
			if e.IsDir() || strings.HasPrefix(name, ".") || filepath.Ext(name) == ".json" {
				continue
			}
			path := filepath.Join(dir, name)
			f, err := readFrame(path, capture, o)
			if !yield(f, err) || err != nil {
				return
			}
		}
	}
}

// readFrame reads a frame and, from the JSON sidecar of the same name where there is one,
// the camera's temperature.
func readFrame(path string, c pipeline.Capture, o files.Options) (Frame, error) {
	raw, err := files.Read(path, o)
	if err != nil {
		return Frame{}, err
	}
	f := Frame{Name: path, Capture: c, Raw: raw}
	sidecar := strings.TrimSuffix(path, filepath.Ext(path)) + ".json"
	text, err := os.ReadFile(sidecar)
	if errors.Is(err, fs.ErrNotExist) {
		return f, nil
	}
	var header struct {
		SensorC *float64 `json:"sensor_c"`
	}
	if err == nil {
		err = json.Unmarshal(text, &header)
	}
	if err != nil {
		return Frame{}, fmt.Errorf("%s: %w", sidecar, err)
	}
	f.SensorC = header.SensorC
	return f, nil
}

func folderCapture(dir string, c pipeline.Capture) (pipeline.Capture, error) {
	path := filepath.Join(dir, "capture.json")
	text, err := os.ReadFile(path)
	if errors.Is(err, fs.ErrNotExist) {
		return c, nil
	}
	if err != nil {
		return c, err
	}
	s := settingsOf(c)
	d := json.NewDecoder(bytes.NewReader(text))
	d.DisallowUnknownFields()
	if err := d.Decode(&s); err != nil {
		return c, fmt.Errorf("%s: %w", path, err)
	}
	return s.onto(c), nil
}

// settings are the numbers of a Capture as they stand in JSON.
type settings struct {
	ExposureUS float64 `json:"exposure_us"`
	GainDB     float64 `json:"gain_db"`
	BlackLevel float64 `json:"black_level"`
	OffsetX    int     `json:"offset_x"`
	OffsetY    int     `json:"offset_y"`
	BinningX   int     `json:"binning_x"`
	BinningY   int     `json:"binning_y"`
}

func settingsOf(c pipeline.Capture) settings {
	return settings{c.ExposureUS, c.GainDB, c.BlackLevel, c.OffsetX, c.OffsetY, max(c.BinningX, 1), max(c.BinningY, 1)}
}

func (s settings) onto(c pipeline.Capture) pipeline.Capture {
	c.ExposureUS, c.GainDB, c.BlackLevel = s.ExposureUS, s.GainDB, s.BlackLevel
	c.OffsetX, c.OffsetY, c.BinningX, c.BinningY = s.OffsetX, s.OffsetY, s.BinningX, s.BinningY
	return c
}
