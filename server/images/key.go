package images

import (
	"fmt"
	"path"
	"path/filepath"
	"strconv"
	"strings"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// empty stands in a key for an identifier that is not given; no identifier can be it.
const empty = "~"

// incoming is the folder in which frames are written; no part can be called so.
const incoming = ".incoming"

const keyParts = 8

// Key returns where a frame is kept: a path with / between its parts, made of the
// identity, the view, the index in the view and the checksum of the pixels, so that two
// frames under one identity never meet. A header that does not pass Check is refused.
func Key(h pipeline.FrameHeader) (string, error) {
	if err := h.Check(); err != nil {
		return "", err
	}
	parts := []string{h.Part, h.Lot, h.Unit, h.Surface, h.Line, h.Station,
		strconv.Itoa(h.Attempt) + empty + string(h.Purpose),
		fmt.Sprintf("%s%s%d%s%08x%s", h.View, empty, h.Index, empty, h.CRC32C, extension(h.Format))}
	for i, p := range parts {
		if p == "" {
			parts[i] = empty
		}
	}
	return path.Join(parts...), nil
}

// extension returns .pgm for formats that PGM keeps count by count, and .raw for packed
// ones, which keep the camera's bytes beside a sidecar.
func extension(f raster.PixelFormat) string {
	if f.BitsPerPixel()%8 == 0 {
		return ".pgm"
	}
	return ".raw"
}

// file returns the path of a key's file; a key that Key cannot have made is refused.
func (s *Store) file(key string) (string, error) {
	parts := strings.Split(key, "/")
	if len(parts) != keyParts {
		return "", pipeline.Invalid("image key: got %q, want %d parts with / between", key, keyParts)
	}
	for _, p := range parts {
		for _, id := range strings.Split(p, empty) {
			if id != "" && (id[0] == '.' || !onlyLetters(id)) {
				return "", pipeline.Invalid("image key: got %q, want letters, digits and . _ - in each part and no leading dot", key)
			}
		}
		if p == "" {
			return "", pipeline.Invalid("image key: got %q, want no empty part", key)
		}
	}
	return filepath.Join(s.dir, filepath.FromSlash(key)), nil
}

const letters = "ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789._-"

func onlyLetters(id string) bool {
	return !strings.ContainsFunc(id, func(r rune) bool { return !strings.ContainsRune(letters, r) })
}
