package raster

// Span is a half-open run of pixels X0 <= x < X1 in row Y.
type Span struct{ Y, X0, X1 int }

// Len returns the number of pixels in the span.
func (s Span) Len() int { return s.X1 - s.X0 }

// Mask is a set of pixels: Bits[y*Width+x] is true inside.
type Mask struct {
	Bits          []bool
	Width, Height int
}

// NewMask returns an empty Mask of width × height pixels.
func NewMask(width, height int) *Mask {
	return &Mask{Bits: make([]bool, width*height), Width: width, Height: height}
}

// At reports whether (x, y) is inside; pixels off the image are outside.
func (m *Mask) At(x, y int) bool {
	return x >= 0 && y >= 0 && x < m.Width && y < m.Height && m.Bits[y*m.Width+x]
}

// Set puts (x, y) into the set or takes it out.
func (m *Mask) Set(x, y int, in bool) { m.Bits[y*m.Width+x] = in }

// Row returns the bits of row y.
func (m *Mask) Row(y int) []bool { return m.Bits[y*m.Width : (y+1)*m.Width] }

// Count returns the number of pixels inside.
func (m *Mask) Count() int {
	n := 0
	for _, in := range m.Bits {
		if in {
			n++
		}
	}
	return n
}

// Spans returns the mask as runs, row by row from the top, left to right.
func (m *Mask) Spans() []Span {
	var out []Span
	for y := range m.Height {
		out = appendRuns(out, m.Row(y), y)
	}
	return out
}

func appendRuns(out []Span, row []bool, y int) []Span {
	for x := 0; x < len(row); {
		if !row[x] {
			x++
			continue
		}
		x0 := x
		for x < len(row) && row[x] {
			x++
		}
		out = append(out, Span{Y: y, X0: x0, X1: x})
	}
	return out
}

// FillSpans puts every pixel of the spans into the mask; what lies off the image is ignored.
func (m *Mask) FillSpans(spans []Span) {
	for _, s := range spans {
		if s.Y < 0 || s.Y >= m.Height {
			continue
		}
		row := m.Row(s.Y)
		for x := max(s.X0, 0); x < min(s.X1, m.Width); x++ {
			row[x] = true
		}
	}
}

// SpanArea returns the number of pixels in the spans.
func SpanArea(spans []Span) int {
	n := 0
	for _, s := range spans {
		n += s.Len()
	}
	return n
}
