package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"maps"
	"os"
	"path/filepath"
	"strings"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/files"
)

// taken is a frame as it came from a source.
type taken struct {
	header pipeline.FrameHeader
	pixels []byte
	path   string
	at     time.Time // when it was read
}

// frameReader makes frames from files: header fields from the sidecar, else from the
// file's name, else from the flags.
type frameReader struct {
	pattern  *pattern
	defaults pipeline.FrameHeader
	bits     int                  // significant bits stated for 16-bit containers; 0 = as the file says
	frames   func(rel string) int // frames in the view of a file where neither name nor sidecar says; nil = defaults
	now      func() time.Time
}

// read returns the frame in a file. With an error, the header holds what was known.
func (r frameReader) read(path string) (taken, error) {
	t := taken{path: path, at: r.now()}
	var format raster.PixelFormat
	var err error
	if t.header, format, err = r.describe(path); err != nil {
		return t, err
	}
	bits := r.bits
	if format != 0 {
		bits = format.SignificantBits()
	}
	raw, err := files.Read(path, files.Options{SignificantBits: bits})
	if err != nil {
		return t, &pipeline.Error{Kind: pipeline.InvalidKind, Err: err}
	}
	return t, t.lay(raw)
}

// describe returns the header without the picture's own facts, and the pixel format
// that a sidecar states.
func (r frameReader) describe(path string) (pipeline.FrameHeader, raster.PixelFormat, error) {
	h := r.defaults
	h.Tags = maps.Clone(h.Tags)
	side, where, err := readSidecar(path)
	if err != nil {
		return h, 0, err
	}
	nameErr := r.pattern.apply(filepath.ToSlash(path), &h)
	if side == nil && nameErr != nil {
		return h, 0, fmt.Errorf("%s: %w; give --pattern, or a header beside it as %s", path, nameErr, where)
	}
	if side != nil {
		if nameErr != nil {
			h = r.defaults
			h.Tags = maps.Clone(h.Tags)
		}
		h = overlay(h, *side)
	}
	if h.Count == 0 {
		h.Count = 1
		if r.frames != nil {
			h.Count = r.frames(path)
		}
	}
	if h.Captured.IsZero() {
		info, err := os.Stat(path)
		if err != nil {
			return h, 0, err
		}
		h.Captured = info.ModTime().UTC()
	}
	return h, h.Format, nil
}

// sidecarNames lists where a header may lie. The JSON beside a .raw file describes its
// pixels, so its header has a name of its own.
func sidecarNames(path string) []string {
	base := strings.TrimSuffix(path, filepath.Ext(path))
	if strings.EqualFold(filepath.Ext(path), ".raw") {
		return []string{base + ".header.json"}
	}
	return []string{base + ".header.json", base + ".json"}
}

func readSidecar(path string) (*pipeline.FrameHeader, string, error) {
	names := sidecarNames(path)
	for _, name := range names {
		text, err := os.ReadFile(name)
		if errors.Is(err, fs.ErrNotExist) {
			continue
		}
		if err != nil {
			return nil, name, err
		}
		var h pipeline.FrameHeader
		d := json.NewDecoder(bytes.NewReader(text))
		d.DisallowUnknownFields()
		if err := d.Decode(&h); err != nil {
			return nil, name, pipeline.Invalid("%s: want a frame's header as JSON: %v", name, err)
		}
		return &h, name, nil
	}
	return nil, names[len(names)-1], nil
}

// overlay lays what the sidecar says over what is known already.
func overlay(h, side pipeline.FrameHeader) pipeline.FrameHeader {
	out := side
	words := [][2]*string{{&out.Part, &h.Part}, {&out.Revision, &h.Revision}, {&out.Surface, &h.Surface}, {&out.Process, &h.Process},
		{&out.Lot, &h.Lot}, {&out.Unit, &h.Unit}, {&out.Line, &h.Line}, {&out.Station, &h.Station}, {&out.View, &h.View},
		{&out.CameraID, &h.CameraID}, {&out.RequestID, &h.RequestID}, {(*string)(&out.Purpose), (*string)(&h.Purpose)}}
	for _, w := range words {
		if *w[0] == "" {
			*w[0] = *w[1]
		}
	}
	numbers := [][2]*int{{&out.Attempt, &h.Attempt}, {&out.Count, &h.Count}, {&out.AnswerWithinMS, &h.AnswerWithinMS}, {&out.Index, &h.Index}}
	for _, n := range numbers {
		if *n[0] == 0 {
			*n[0] = *n[1]
		}
	}
	tags := maps.Clone(h.Tags)
	if tags == nil {
		tags = map[string]string{}
	}
	maps.Copy(tags, side.Tags)
	out.Tags = tags
	return overlayCapture(out, h)
}

func overlayCapture(out, h pipeline.FrameHeader) pipeline.FrameHeader {
	reals := [][2]*float64{{&out.ExposureUS, &h.ExposureUS}, {&out.GainDB, &h.GainDB}, {&out.BlackLevel, &h.BlackLevel}}
	for _, f := range reals {
		if *f[0] == 0 {
			*f[0] = *f[1]
		}
	}
	if out.FrameCounter == 0 {
		out.FrameCounter = h.FrameCounter
	}
	return out
}

// lay puts the picture under the header. A sidecar that speaks of another picture is
// an error.
func (t *taken) lay(raw raster.Raw) error {
	h := &t.header
	if (h.Width != 0 && h.Width != raw.Width) || (h.Height != 0 && h.Height != raw.Height) {
		return pipeline.Invalid("%s: size: picture has %d × %d px, its header says %d × %d", t.path, raw.Width, raw.Height, h.Width, h.Height)
	}
	if h.Format != 0 && h.Format.SignificantBits() != raw.Format.SignificantBits() {
		return pipeline.Invalid("%s: format: picture has %s, its header says %s", t.path, raw.Format, h.Format)
	}
	sum := pipeline.Checksum(raw.Data)
	if h.CRC32C != 0 && h.CRC32C != sum {
		return pipeline.Invalid("%s: crc32c: picture has 0x%08x, its header says 0x%08x", t.path, sum, h.CRC32C)
	}
	h.Format, h.Width, h.Height, h.Stride, h.CRC32C = raw.Format, raw.Width, raw.Height, raw.Stride, sum
	t.pixels = raw.Data
	return checkHeader(t.path, *h)
}

// checkHeader is FrameHeader.Check, but lets the server give unit and attempt.
func checkHeader(path string, h pipeline.FrameHeader) error {
	if h.Unit == "" {
		if h.RequestID == "" {
			return pipeline.Invalid("%s: unit: not given; name it, or give request_id to every frame of the showing so that the server can give a unit", path)
		}
		h.Unit = "given-by-server"
	}
	if h.Attempt == 0 {
		h.Attempt = 1
	}
	if err := h.Check(); err != nil {
		return fmt.Errorf("%s: %w", path, err)
	}
	return nil
}
