package raster

import "math"

// longRatio is the length over width, by second moments at half height, from which a
// blob is measured along its own course.
const longRatio = 3

// coiledPart is the share of the width, by moments or profile, that the geodesic
// thickness stays below where the course is no simple one.
const coiledPart = 0.6

// Blemish is what is measured of a blob. Lengths are in px, heights in DN.
type Blemish struct {
	X, Y         float64 // centre of gravity, weighted with the signal (see centre.go)
	AreaPx       int     // pixels above the low threshold
	HalfArea     float64 // area at half height, px
	Length       float64 // at half height: 4√λ₁ of that region, along the course when Long, see geodesic when Coiled
	Width        float64 // at half height: 4√λ₂, of the mean profile across the course when Long, see geodesic when Coiled
	Diameter     float64 // √(4·HalfArea/π)
	Angle        float64 // of the long axis, degrees from +x towards +y, −90 < angle <= 90
	Height       float64 // of the plateau above background, DN
	Flux         float64 // signal over the footprint grown by 2 px, DN·px
	Peak         float64 // highest signal of a pixel, DN
	PeakSNR      float64 // highest value of the snr plane
	SNR          float64 // Flux / √Σ noise² over the same pixels
	Dark         bool    // darker than the background; flux and heights are of the negative
	Long         bool    // measured along its course
	Coiled       bool    // bends back, coils or branches: length and width are the geodesic ones
	Path         []Point // the course, only when Long
	X0, Y0       int     // bounding box of the blob's pixels, half-open
	X1, Y1       int
	PeakX, PeakY int // of the snr plane
}

// Point is a place in pixels.
type Point struct{ X, Y float64 }

// Measurer measures blobs of one picture.
type Measurer struct {
	signal, noise *Plane
	mask          *Mask
	blobs         []Blob
	boxes         [][4]int
}

// NewMeasurer returns a Measurer of blobs found in a picture whose signal (DN above
// the background, of either sign) and noise (DN, one pixel) are given. Pixels outside
// mask are not used. It panics when the sizes differ.
func NewMeasurer(signal, noise *Plane, mask *Mask, blobs []Blob) *Measurer {
	checkMask(signal, mask)
	checkMask(noise, mask)
	m := &Measurer{signal: signal, noise: noise, mask: mask, blobs: blobs}
	for _, b := range blobs {
		x0, y0, x1, y1 := bounds(b.Spans)
		m.boxes = append(m.boxes, [4]int{x0, y0, x1, y1})
	}
	return m
}

// Measure measures blob i. Size is taken at half of the blob's own height, so it moves
// neither with the threshold nor with the light's power. Pixels that another blob owns
// are left out.
func (m *Measurer) Measure(i int) Blemish {
	b := m.blobs[i]
	box := m.boxes[i]
	w := m.cut(i)
	out := Blemish{AreaPx: SpanArea(b.Spans), PeakSNR: float64(b.Peak), PeakX: b.PeakX, PeakY: b.PeakY,
		Dark: m.sign(i) < 0, X0: box[0], Y0: box[1], X1: box[2], Y1: box[3]}
	m.flux(&out, w)
	height, s := w.halfHeight()
	if s.Area <= 0 || s.Width <= 0 {
		s = ShapeOf(b.Spans)
		height = out.Peak / 2
	}
	out.Height, out.HalfArea, out.Diameter = height, s.Area, s.Diameter()
	out.Length, out.Width, out.Angle = s.Length, s.Width, s.Angle
	out.X, out.Y = w.centre(b.Spans, s)
	if s.Length > longRatio*s.Width {
		m.follow(&out, w, s)
	}
	m.uncoil(&out, w)
	return out
}

// uncoil measures a thin blob whose course bends back, coils or branches: there neither
// the second moments nor the profile across a course tell its width.
func (m *Measurer) uncoil(out *Blemish, w *window) {
	length, width, ok := geodesic(out.HalfArea, w.contourLength(float32(out.Height/2)))
	if !ok || length < longRatio*width || width > coiledPart*out.Width {
		return
	}
	out.Coiled, out.Length, out.Width = true, length, unsmoothed(width)
}

// unsmoothed takes from a width at half height what the 3×3 binomial smoothing, of
// variance ½ px² across, added to it: 8·ln 2·½ in quadrature. That is exact for a
// Gaussian profile; a box of 3 px comes out 0.1 px and one of 5 px 0.3 px narrow.
func unsmoothed(width float64) float64 {
	return math.Sqrt(max(width*width-4*math.Ln2, 0.25))
}

// sign returns −1 for a blob that is darker than the background.
func (m *Measurer) sign(i int) float32 {
	sum := float32(0)
	for _, s := range m.blobs[i].Spans {
		for _, v := range m.signal.Row(s.Y)[s.X0:s.X1] {
			sum += v
		}
	}
	if sum < 0 {
		return -1
	}
	return 1
}

func (m *Measurer) flux(out *Blemish, w *window) {
	variance := 0.
	for i, in := range w.foot {
		if in {
			v := float64(w.signal[i])
			n := float64(m.noise.At(w.x0+i%w.width, w.y0+i/w.width))
			out.Flux += v
			out.Peak = max(out.Peak, v)
			variance += n * n
		}
	}
	if variance > 0 {
		out.SNR = out.Flux / math.Sqrt(variance)
	}
}

func (m *Measurer) follow(out *Blemish, w *window, s Shape) {
	length, width, path, ok := w.follow(s)
	if !ok || length <= width {
		return
	}
	out.Long, out.Length, out.Width, out.Path = true, length, width, path
}
