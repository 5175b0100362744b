package render

import (
	"math"
)

// discRows is how many lines a row of a fine patch is cut into for a disc.
const discRows = 12

// drawDisc adds, to a fine patch, value times the share of each of its pixels that the
// disc covers: exact along x, by discRows chords along y. x, y and radius are in whole
// pixels.
func (p *patch) drawDisc(x, y, radius float64, value float32) {
	x, y, radius = fineAt(x), fineAt(y), radius*fineness
	const step = 1.0 / discRows
	for py := range p.h {
		row := p.row(py)
		for k := range discRows {
			dy := float64(p.y0+py) - 0.5 + (float64(k)+0.5)*step - y
			if half := radius*radius - dy*dy; half > 0 {
				half = math.Sqrt(half)
				addChord(row, x-half-float64(p.x0), x+half-float64(p.x0), value*float32(step))
			}
		}
	}
}

// addChord adds value times the covered share of each pixel to a row, for a chord from
// a to b, where pixel i reaches from i − ½ to i + ½.
func addChord(row []float32, a, b float64, value float32) {
	first, last := int(math.Floor(a+0.5)), int(math.Floor(b+0.5))
	for i := max(first, 0); i <= min(last, len(row)-1); i++ {
		share := min(b, float64(i)+0.5) - max(a, float64(i)-0.5)
		row[i] += value * float32(share)
	}
}

// outlineSteps is how many points along each side of a fine pixel are asked for an
// irregular shape.
const outlineSteps = 2

// drawShape adds, to a fine patch, value times the share of each pixel's points that are
// inside; inside is asked in whole pixels.
func (p *patch) drawShape(value float32, inside func(x, y float64) bool) {
	value /= outlineSteps * outlineSteps
	for py := range p.h {
		row := p.row(py)
		for px := range row {
			for k := range outlineSteps * outlineSteps {
				x := (float64(p.x0+px)+(float64(k%outlineSteps)+0.5)/outlineSteps)/fineness - 0.5
				y := (float64(p.y0+py)+(float64(k/outlineSteps)+0.5)/outlineSteps)/fineness - 0.5
				if inside(x, y) {
					row[px] += value
				}
			}
		}
	}
}

// arc is a stroke of constant curvature in pixels: its middle, the unit vectors along
// and across it there, and the curvature, which bends it towards across.
type arc struct {
	x, y              float64
	alongX, alongY    float64
	acrossX, acrossY  float64
	bend              float64 // 1/px
	halfLen, halfWide float64 // px
}

// off returns how far (x, y) is off the arc's circle, towards across.
func (a arc) off(x, y float64) float64 {
	s, n := a.coordinates(x, y)
	if a.bend == 0 {
		return n
	}
	radius := 1 / a.bend
	return radius - math.Copysign(math.Hypot(s, radius-n), radius)
}

// along returns how far along the arc from its middle the point next to (x, y) is, and
// the angle by which the arc has turned there.
func (a arc) along(x, y float64) (distance, turn float64) {
	s, n := a.coordinates(x, y)
	if a.bend == 0 {
		return s, 0
	}
	turn = math.Atan2(s*a.bend, 1-n*a.bend)
	return turn / a.bend, turn
}

func (a arc) coordinates(x, y float64) (along, across float64) {
	dx, dy := x-a.x, y-a.y
	return dx*a.alongX + dy*a.alongY, dx*a.acrossX + dy*a.acrossY
}

// drawArc adds the arc as seen through a Gaussian of the given sigma and a pixel: the
// pixel's own width enters as a variance of 1/12. Its sum is value × length × width.
// direction, where given, weighs each point by the angle through which the arc turned.
func (p *patch) drawArc(a arc, sigma float64, value float32, direction func(turn float64) float64) {
	s := math.Sqrt(sigma*sigma+1.0/12) * math.Sqrt2
	reach := a.halfWide + blurReach*s
	for py := range p.h {
		row := p.row(py)
		for px := range row {
			x, y := float64(p.x0+px), float64(p.y0+py)
			off := a.off(x, y)
			if math.Abs(off) > reach {
				continue
			}
			along, turn := a.along(x, y)
			if math.Abs(along) > a.halfLen+blurReach*s {
				continue
			}
			v := boxThrough(off, a.halfWide, s) * boxThrough(along, a.halfLen, s)
			if direction != nil {
				v *= direction(turn)
			}
			row[px] += value * float32(v)
		}
	}
}

// boxThrough is a box from −half to half seen through a Gaussian of sigma s/√2, at d.
func boxThrough(d, half, s float64) float64 {
	return (math.Erf((d+half)/s) - math.Erf((d-half)/s)) / 2
}
