package raster

// growPx is how far a footprint is grown before flux and half-height size are taken,
// so that they do not depend on where the low threshold cut.
const growPx = 2

// windowMargin is what a window holds around the footprint: the growth and the reach of
// the smoothing.
const windowMargin = growPx + 2

// window is the surroundings of one blob, cut out of the picture.
type window struct {
	x0, y0, width, height int
	signal                []float32 // DN above background, positive in the blob; 0 outside the mask
	usable                []bool    // in the mask and not another blob's
	foot                  []bool    // the grown footprint, where usable
	smooth                []float32 // signal under a 3 × 3 binomial filter, 0 outside foot
}

func bounds(spans []Span) (x0, y0, x1, y1 int) {
	x0, x1 = spans[0].X0, spans[0].X1
	y0, y1 = spans[0].Y, spans[len(spans)-1].Y+1
	for _, s := range spans {
		x0, x1 = min(x0, s.X0), max(x1, s.X1)
	}
	return x0, y0, x1, y1
}

// cut makes the window of blob i. Pixels of other blobs in it are not usable.
func (m *Measurer) cut(i int) *window {
	x0, y0, x1, y1 := bounds(m.blobs[i].Spans)
	x0, y0 = max(x0-windowMargin, 0), max(y0-windowMargin, 0)
	x1, y1 = min(x1+windowMargin, m.signal.Width), min(y1+windowMargin, m.signal.Height)
	w := &window{x0: x0, y0: y0, width: x1 - x0, height: y1 - y0}
	n := w.width * w.height
	w.signal, w.smooth = make([]float32, n), make([]float32, n)
	w.usable, w.foot = make([]bool, n), make([]bool, n)
	for y := range w.height {
		copy(w.usable[y*w.width:(y+1)*w.width], m.mask.Row(y0 + y)[x0:x1])
	}
	for j, o := range m.boxes {
		if j != i && o[0] < x1 && o[2] > x0 && o[1] < y1 && o[3] > y0 {
			w.mark(w.usable, m.blobs[j].Spans, false)
		}
	}
	w.load(m.signal, m.sign(i))
	w.grow(m.blobs[i].Spans)
	w.smoothen()
	return w
}

func (w *window) mark(dst []bool, spans []Span, value bool) {
	for _, s := range spans {
		if s.Y < w.y0 || s.Y >= w.y0+w.height {
			continue
		}
		for x := max(s.X0, w.x0); x < min(s.X1, w.x0+w.width); x++ {
			dst[(s.Y-w.y0)*w.width+x-w.x0] = value
		}
	}
}

func (w *window) load(signal *Plane, sign float32) {
	for y := range w.height {
		row := signal.Row(w.y0 + y)[w.x0 : w.x0+w.width]
		for x, v := range row {
			if i := y*w.width + x; w.usable[i] {
				w.signal[i] = sign * v
			}
		}
	}
}

// grow puts the blob's pixels and those within growPx of them into foot, as far as usable.
func (w *window) grow(spans []Span) {
	for _, s := range spans {
		for dy := -growPx; dy <= growPx; dy++ {
			reach := growPx
			if dy == growPx || dy == -growPx {
				reach--
			}
			w.mark(w.foot, []Span{{Y: s.Y + dy, X0: s.X0 - reach, X1: s.X1 + reach}}, true)
		}
	}
	for i := range w.foot {
		w.foot[i] = w.foot[i] && w.usable[i]
	}
}

// smoothen writes the signal under the 3 × 3 binomial filter (1 2 1)/4, which leaves 3/8
// of white noise and adds 1/2 px² to the variance of a spot. Pixels that are not usable
// do not count; the weights of the others are scaled to a sum of 1.
func (w *window) smoothen() {
	for i, in := range w.foot {
		if in {
			w.smooth[i] = w.binomialMean(i%w.width, i/w.width)
		}
	}
}

func (w *window) binomialMean(x, y int) float32 {
	sum, weights := float32(0), float32(0)
	for v := max(y-1, 0); v <= min(y+1, w.height-1); v++ {
		for u := max(x-1, 0); u <= min(x+1, w.width-1); u++ {
			if i := v*w.width + u; w.usable[i] {
				k := float32(1)
				if u == x {
					k *= 2
				}
				if v == y {
					k *= 2
				}
				sum += k * w.signal[i]
				weights += k
			}
		}
	}
	return sum / weights
}
