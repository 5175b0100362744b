package raster

import (
	"fmt"
	"math"
)

// Circle is a circle in pixels.
type Circle struct{ X, Y, R float64 }

// CircleSearch says which circle is looked for.
type CircleSearch struct {
	X, Y       float64 // expected centre, px
	Reach      float64 // how far the centre may lie from it, px
	RMin, RMax float64 // px
	DarkInside bool    // the part is darker than its surroundings
	Ridge      bool    // the outline itself is a bright line, as a chamfer is in dark field
	Rays       int     // directions in which the edge is looked for; 0 = DefaultRays
	MaxRMS     float64 // residuals beyond this are no circle, px; 0 = 1.5
}

// CircleFit is a circle found in a picture, with what it rests on.
type CircleFit struct {
	Circle
	Points    int     // edge points that the fit rests on
	Rays      int     // directions whose edge would have lain in the frame
	RMS       float64 // root mean square of their radial residuals, px
	EdgeWidth float64 // 10–90 % width of the mean edge profile, px; 0 = not measurable
}

// DefaultRays is in how many directions the edge is looked for.
const DefaultRays = 360

// leastPoints is the share of the rays that must have found the edge.
const leastPoints = 0.3

// FindCircle finds the outline of a round part. It votes for the centre with the
// gradients of a reduced picture (Hough transform; Duda and Hart 1972), walks out
// along rays to the steepest place of the wanted sign (with Ridge, to the crest of the
// bright line), to a fraction of a pixel, and fits
// a circle to these points (FitCircle). The error says how far it came.
func FindCircle(src *Plane, s CircleSearch) (CircleFit, error) {
	if !(s.RMin > 0) || !(s.RMax > s.RMin) || !(s.Reach >= 0) {
		panic(fmt.Sprintf("raster: circle search %+v out of range", s))
	}
	if s.Rays == 0 {
		s.Rays = DefaultRays
	}
	if s.MaxRMS == 0 {
		s.MaxRMS = 1.5
	}
	coarse, ok := coarseCircle(src, s)
	if !ok {
		return CircleFit{}, fmt.Errorf("no circle of radius %.1f to %.1f px within %.1f px of (%.1f, %.1f): no edge votes for one", s.RMin, s.RMax, s.Reach, s.X, s.Y)
	}
	fit := CircleFit{Circle: coarse}
	for _, reach := range []float64{max(12, coarse.R*0.05), 9, 7, 6} {
		points, rays := edgePoints(src, fit.Circle, reach, s)
		circle, used, rms, ok := FitCircle(points)
		if !ok || float64(len(used)) < leastPoints*float64(s.Rays) {
			return CircleFit{Points: len(used), Rays: rays}, fmt.Errorf("no circle of radius %.1f to %.1f px near (%.1f, %.1f): %d edge points of %d rays lie on one, want at least %d",
				s.RMin, s.RMax, s.X, s.Y, len(used), s.Rays, int(math.Ceil(leastPoints*float64(s.Rays))))
		}
		fit = CircleFit{Circle: circle, Points: len(used), Rays: rays, RMS: rms}
	}
	if fit.RMS > s.MaxRMS {
		return fit, fmt.Errorf("no circle of radius %.1f to %.1f px near (%.1f, %.1f): the edge points scatter by %.2f px rms, want at most %.2f", s.RMin, s.RMax, s.X, s.Y, fit.RMS, s.MaxRMS)
	}
	if fit.R < s.RMin || fit.R > s.RMax || math.Hypot(fit.X-s.X, fit.Y-s.Y) > s.Reach {
		return fit, fmt.Errorf("circle of radius %.1f px at (%.1f, %.1f), want radius %.1f to %.1f px within %.1f px of (%.1f, %.1f)",
			fit.R, fit.X, fit.Y, s.RMin, s.RMax, s.Reach, s.X, s.Y)
	}
	fit.EdgeWidth = edgeWidth(src, fit.Circle, s)
	return fit, nil
}

// bilinear returns the value at (x, y); false when that is not between pixel centres.
func bilinear(p *Plane, x, y float64) (float64, bool) {
	if !(x >= 0 && y >= 0 && x <= float64(p.Width-1) && y <= float64(p.Height-1)) {
		return 0, false
	}
	ix, iy := min(int(x), max(p.Width-2, 0)), min(int(y), max(p.Height-2, 0))
	jx, jy := min(ix+1, p.Width-1), min(iy+1, p.Height-1)
	fx, fy := x-float64(ix), y-float64(iy)
	top := (1-fx)*float64(p.At(ix, iy)) + fx*float64(p.At(jx, iy))
	bottom := (1-fx)*float64(p.At(ix, jy)) + fx*float64(p.At(jx, jy))
	return (1-fy)*top + fy*bottom, true
}
