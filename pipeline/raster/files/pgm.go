package files

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"io"

	"lapgate/pipeline/raster"
)

// The PGM layout is that of the netpbm pgm(5) page: magic, width, height, maxval as
// decimal text with # comments, one white-space byte, then samples row by row: one
// byte each for a maxval below 256, else two, most significant first (P5), or decimal
// text (P2).

type pgmHeader struct {
	plain                 bool // P2
	width, height, maxval int
}

func decodePGM(data []byte, o Options) (raster.Raw, error) {
	h, body, err := parsePGMHeader(data)
	if err != nil {
		return raster.Raw{}, fmt.Errorf("PGM: %w", err)
	}
	bits, err := pgmBits(h.maxval, o)
	if err != nil {
		return raster.Raw{}, fmt.Errorf("PGM: %w", err)
	}
	if err := o.checkSize(h.width, h.height, 2); err != nil {
		return raster.Raw{}, fmt.Errorf("PGM: %w", err)
	}
	read := binarySamples
	if h.plain {
		read = plainSamples
	}
	counts, err := read(h, body)
	if err != nil {
		return raster.Raw{}, fmt.Errorf("PGM: %w", err)
	}
	return o.frame(counts, h.width, h.height, bits)
}

func pgmBits(maxval int, o Options) (int, error) {
	switch maxval {
	case 255:
		return 8, nil
	case 1023:
		return 10, nil
	case 4095:
		return 12, nil
	case 65535:
		return 16, nil
	}
	if o.SignificantBits == 0 {
		return 0, fmt.Errorf("maxval: got %d, want 255, 1023, 4095 or 65535, or the significant bits stated", maxval)
	}
	if maxval < 256 {
		return 8, nil
	}
	return 16, nil
}

func parsePGMHeader(data []byte) (pgmHeader, []byte, error) {
	h := pgmHeader{plain: data[1] == '2'}
	rest := data[2:]
	for _, field := range []struct {
		name string
		into *int
		most int
	}{{"width", &h.width, raster.MaxSide}, {"height", &h.height, raster.MaxSide}, {"maxval", &h.maxval, 65535}} {
		var err error
		rest, err = skipSpace(rest, true)
		if err == nil {
			*field.into, rest, err = pgmNumber(rest)
		}
		if err != nil {
			return h, nil, fmt.Errorf("%s: %w", field.name, err)
		}
		if *field.into < 1 || *field.into > field.most {
			return h, nil, fmt.Errorf("%s: got %d, want 1 to %d", field.name, *field.into, field.most)
		}
	}
	if len(rest) == 0 || !isSpace(rest[0]) {
		return h, nil, errors.New("header: no white space after maxval")
	}
	return h, rest[1:], nil
}

// skipSpace skips white space, at least one byte of it, and comments where allowed.
func skipSpace(data []byte, comments bool) ([]byte, error) {
	start := len(data)
	for len(data) > 0 {
		switch {
		case isSpace(data[0]):
			data = data[1:]
		case comments && data[0] == '#':
			end := bytes.IndexByte(data, '\n')
			if end < 0 {
				return nil, io.ErrUnexpectedEOF
			}
			data = data[end:]
		case len(data) == start:
			return nil, fmt.Errorf("got %q, want white space", data[0])
		default:
			return data, nil
		}
	}
	return nil, io.ErrUnexpectedEOF
}

func isSpace(b byte) bool { return b == ' ' || b >= '\t' && b <= '\r' }

// pgmNumber reads digits; a value above 65535 comes back as 65536.
func pgmNumber(data []byte) (int, []byte, error) {
	n, i := 0, 0
	for ; i < len(data) && data[i] >= '0' && data[i] <= '9'; i++ {
		n = min(10*n+int(data[i]-'0'), 65536)
	}
	if i == 0 {
		if len(data) == 0 {
			return 0, nil, io.ErrUnexpectedEOF
		}
		return 0, nil, fmt.Errorf("got %q, want a decimal number", data[0])
	}
	return n, data[i:], nil
}

func binarySamples(h pgmHeader, body []byte) ([]uint16, error) {
	size := 1
	if h.maxval > 255 {
		size = 2
	}
	if want := h.width * h.height * size; len(body) != want {
		return nil, fmt.Errorf("data: got %d bytes, want %d for one picture of %d × %d pixels", len(body), want, h.width, h.height)
	}
	counts := make([]uint16, h.width*h.height)
	for i := range counts {
		if size == 1 {
			counts[i] = uint16(body[i])
		} else {
			counts[i] = binary.BigEndian.Uint16(body[2*i:])
		}
	}
	return counts, checkMaxval(counts, h)
}

func checkMaxval(counts []uint16, h pgmHeader) error {
	for i, c := range counts {
		if int(c) > h.maxval {
			return fmt.Errorf("data: count %d at pixel (%d, %d), want at most maxval %d", c, i%h.width, i/h.width, h.maxval)
		}
	}
	return nil
}

func plainSamples(h pgmHeader, body []byte) ([]uint16, error) {
	n := h.width * h.height
	if len(body) < 2*n-1 { // a digit each and a space between
		return nil, fmt.Errorf("data: got %d bytes, too few for %d × %d samples", len(body), h.width, h.height)
	}
	counts := make([]uint16, n)
	body = append([]byte{' '}, body...)
	for i := range counts {
		var value int
		rest, err := skipSpace(body, false)
		if err == nil {
			value, body, err = pgmNumber(rest)
		}
		if err == nil && value > h.maxval {
			err = fmt.Errorf("count above maxval %d", h.maxval)
		}
		if err != nil {
			return nil, fmt.Errorf("data: pixel (%d, %d): %w", i%h.width, i/h.width, err)
		}
		counts[i] = uint16(value)
	}
	if rest := bytes.TrimSpace(body); len(rest) > 0 {
		return nil, fmt.Errorf("data: %d bytes after the last sample, want one picture", len(rest))
	}
	return counts, nil
}

// EncodePGM writes the frame as binary PGM (P5) with the format's largest count as
// maxval. It returns the error of Raw.Counts for a frame that is not whole.
func EncodePGM(w io.Writer, r raster.Raw) error {
	counts, err := r.Counts()
	if err != nil {
		return err
	}
	out := fmt.Appendf(nil, "P5\n%d %d\n%d\n", r.Width, r.Height, r.Format.MaxCount())
	for _, c := range counts {
		if r.Format.MaxCount() > 255 {
			out = append(out, byte(c>>8))
		}
		out = append(out, byte(c))
	}
	_, err = w.Write(out)
	return err
}
