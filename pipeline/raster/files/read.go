package files

import (
	"bytes"
	"fmt"
	"io"
	"os"

	"lapgate/pipeline/raster"
)

// slack is how much longer than its decoded picture a file may be: headers and
// metadata.
const slack = 1 << 20

// Read returns the frame in the file at path. What the file is, its content says, not
// its name; only raw pixels, which have no mark of their own, are known by the
// sidecar beside them (see WriteRaw), and either of the two may be named. The error
// begins with the path.
func Read(path string, o Options) (raster.Raw, error) {
	if sidecar, ok := sidecarOf(path); ok {
		return readSidecar(sidecar, o)
	}
	f, err := os.Open(path)
	if err != nil {
		return raster.Raw{}, err
	}
	defer f.Close()
	r, err := Decode(f, o)
	if err != nil {
		return raster.Raw{}, fmt.Errorf("%s: %w", path, err)
	}
	return r, nil
}

// Decode returns the frame in a stream that holds one PGM, PNG, TIFF or JPEG picture.
//
// PGM: maxval 255, 1023, 4095 and 65535 are Mono8, Mono10, Mono12 and Mono16; another
// maxval needs Options.SignificantBits. PNG and TIFF: 8 and 16 bits of grey are Mono8
// and Mono16 unless SignificantBits says how many bits of a 16-bit word are used; a
// TIFF in which white is zero is turned over (count = full scale − stored value).
// JPEG: Mono8. Colour goes by Options.Colour. Palettes, fewer than 8 bits, CMYK,
// several pictures in one TIFF or PGM and alpha that is not opaque everywhere are
// refused.
func Decode(r io.Reader, o Options) (raster.Raw, error) {
	if err := o.check(); err != nil {
		return raster.Raw{}, err
	}
	most := int64(o.maxBytes()) + slack
	data, err := io.ReadAll(io.LimitReader(r, most+1))
	if err != nil {
		return raster.Raw{}, err
	}
	if int64(len(data)) > most {
		return raster.Raw{}, fmt.Errorf("size: file is longer than %d bytes", most)
	}
	return decodeByContent(data, o)
}

func decodeByContent(data []byte, o Options) (raster.Raw, error) {
	switch kind := kindOf(data); kind {
	case "PGM":
		return decodePGM(data, o)
	case "PNG":
		return decodePNG(data, o)
	case "TIFF":
		return decodeTIFF(data, o)
	case "JPEG":
		return decodeJPEG(data, o)
	}
	return raster.Raw{}, fmt.Errorf("content: starts with % x, want PGM (P2 or P5), PNG, TIFF or JPEG", data[:min(len(data), 8)])
}

func kindOf(data []byte) string {
	for _, m := range []struct{ kind, magic string }{
		{"PGM", "P5"}, {"PGM", "P2"},
		{"PNG", "\x89PNG\r\n\x1a\n"},
		{"TIFF", "II*\x00"}, {"TIFF", "MM\x00*"},
		{"JPEG", "\xff\xd8\xff"},
	} {
		if bytes.HasPrefix(data, []byte(m.magic)) {
			return m.kind
		}
	}
	return ""
}
