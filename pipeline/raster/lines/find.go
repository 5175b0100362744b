package lines

// #include "lines.h"
import "C"

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"sync"

	"lapgate/pipeline/raster"
)

// Line is a line that was found. Lengths are px of the picture.
type Line struct {
	Path     []raster.Point // from one end to the other; straight between the points
	Length   float64        // along the path
	Width    float64        // at half height of the mean profile across the path
	Angle    float64        // from end to end, degrees from +x towards +y, −90 < angle <= 90
	Contrast float64        // highest of the mean profile across, sigmas of a pixel
	Flux     float64        // the profile's sum times the length, sigmas · px²
	Peak     float64        // the strongest 5 px of the course, in their own sigmas
	Sigmas   float64        // the sum along the line over its spread
	White    float64        // the same over what it would spread in white noise
	Dark     bool           // darker than its surroundings
}

// Result is what Find found.
type Result struct {
	Lines       []Line // the strongest first
	Truncated   bool   // there were more than Settings.MaxLines
	Seeds       int    // lines through one strip that were looked at
	Lay         Lay    // what made the sums of some slopes scatter
	MemoryBytes int64  // taken in C, beside the picture
}

// Finder looks for lines. Its memory is kept from one picture to the next of the same size
// and resolution; it may be used by several goroutines at once.
type Finder struct{ free sync.Pool }

// mostSeeds is how many lines through one strip are looked at, the strongest first. A
// frame of white noise of 12 million pixels has some 200.
const mostSeeds = 100000

// Find looks for lines in the region of a plane of unit noise and mean 0: its pixels over
// their noise. Pixels of bad (nil = none), and those that are no numbers, do not count.
func (f *Finder) Find(p *raster.Plane, region raster.Rows, bad *raster.Mask, s Settings) (*Result, error) {
	if err := s.Check(); err != nil {
		return nil, err
	}
	if bad != nil && (bad.Width != p.Width || bad.Height != p.Height) {
		return nil, fmt.Errorf("bad pixels: got %d × %d px, the picture has %d × %d", bad.Width, bad.Height, p.Width, p.Height)
	}
	width, height, thickness := p.Width, p.Height, 1.
	if s.Half {
		width, height, thickness = width/2, height/2, 0.5
	}
	if min(width, height) < leastPositions || max(p.Width, p.Height) > 1<<15 {
		return &Result{}, sizeError(p)
	}
	w, ok := f.free.Get().(*work)
	if !ok || w.width != width || w.height != height || w.thickness != thickness {
		var err error
		if w, err = newWork(width, height, thickness); err != nil {
			return nil, err
		}
	}
	defer f.free.Put(w)
	w.load(p, region.Spans(), bad, s.Half)
	one := finder{work: w, weights: w.weights, s: s.inPixels(), plane: p, bad: bad, region: newBorder(region, p.Width, p.Height)}
	return one.find()
}

// sizeError refuses pictures of more than 32 768 px a side; one too small has no lines.
func sizeError(p *raster.Plane) error {
	if max(p.Width, p.Height) > 1<<15 {
		return fmt.Errorf("picture: got %d × %d px, want at most %d a side", p.Width, p.Height, 1<<15)
	}
	return nil
}

// finder is one call of Find.
type finder struct {
	work    *work
	weights *weights
	s       Settings // lengths in pixels of the picture searched
	spread  *spread
	rings   *rings // nil = no concentric lay
	plane   *raster.Plane
	bad     *raster.Mask
	region  border
}

func (f *finder) find() (*Result, error) {
	hits, spread, err := f.work.hits(f.s)
	if err != nil {
		return nil, err
	}
	f.spread = spread
	f.rings = f.findRings()
	slices.SortFunc(hits, func(a, b C.ln_hit) int {
		return cmp.Or(cmp.Compare(b.sigmas, a.sigmas), cmp.Compare(a.axis, b.axis), cmp.Compare(a.first, b.first),
			cmp.Compare(a.flipped, b.flipped), cmp.Compare(a.x, b.x), cmp.Compare(a.t, b.t))
	})
	r := &Result{Lay: f.lay(), Seeds: len(hits), MemoryBytes: int64(C.ln_work_bytes(f.work.c))}
	if len(hits) > mostSeeds {
		hits, r.Truncated = hits[:mostSeeds], true
	}
	var courses []course
	tried := map[[5]int32]bool{}
	for _, h := range hits {
		if c, ok := f.try(h, tried); ok {
			courses = append(courses, c)
		}
	}
	f.report(r, f.join(courses))
	return r, nil
}

// leastNow is the share of the seed's sigmas that a line through a strip must have between
// pixels, before its ends are moved.
const leastNow = 0.85

// scatter is that of the line sums at the place and slope of a stretch.
func (f *finder) scatter(k stretch) scatter {
	s := f.spread.along(k)
	if f.rings != nil {
		s = s.most(f.rings.along(k))
	}
	return s
}

// try refines a hit and judges what comes out.
func (f *finder) try(h C.ln_hit, tried map[[5]int32]bool) (course, bool) {
	k, sign := f.strip(h), 1
	if h.value < 0 {
		sign = -1
	}
	need := f.s.Seed * math.Sqrt(f.scatter(k).over(k.positions()))
	if f.sum(k).sigmas(sign) < leastNow*need || beenNear(tried, h) { // what was found before no longer counts
		return course{}, false
	}
	k, now := f.settle(k, 2, 0.75, sign)
	if now.sigmas(sign) < need {
		return course{}, false
	}
	p := f.withoutSpots(f.refine(k, sign))
	if p.sigmas() < f.s.Threshold {
		remember(tried, h)
		return course{}, false
	}
	if p.blocks = f.blocks(p); !even(p.blocks, p.scatter.over(p.positions())) {
		f.dim(p)
		return course{}, false
	}
	c := f.follow(p)
	c.ridge = !f.standsOut(c)
	f.eraseCourse(c)
	return c, true
}

// withoutSpots takes the spots on a line out and refines it anew, until it has none left or
// comes to nothing without them.
func (f *finder) withoutSpots(p piece) piece {
	for range mostSpots {
		if p.sigmas() < f.s.Threshold || !f.takeOut(p.stretch, p.sign, level(f.heights(p.stretch, p.sign))) {
			break
		}
		p = f.refine(p.stretch, p.sign)
	}
	return p
}

// nearPx is how near each other two lines that lead to nothing are taken to be the same.
const nearPx = 6

func place(h C.ln_hit, dx, dt int32) [5]int32 {
	return [5]int32{int32(h.axis), int32(h.flipped), int32(h.first), int32(h.x+4096)/nearPx + dx, (int32(h.x)+int32(h.t)+4096)/nearPx + dt}
}

func remember(tried map[[5]int32]bool, h C.ln_hit) { tried[place(h, 0, 0)] = true }

func beenNear(tried map[[5]int32]bool, h C.ln_hit) bool {
	for dx := int32(-1); dx <= 1; dx++ {
		for dt := int32(-1); dt <= 1; dt++ {
			if tried[place(h, dx, dt)] {
				return true
			}
		}
	}
	return false
}

// report measures the courses and keeps those that are lines of the settings.
func (f *finder) report(r *Result, courses []course) {
	for _, c := range courses {
		if c.sigmas() < f.s.need(f.scale()*c.length()) || c.length() < f.s.MinLength || f.region.along(f.path(c), f.rim()) {
			continue
		}
		if c.ridge || !c.even() {
			continue
		}
		if l, ok := f.measure(c); ok {
			r.Lines = append(r.Lines, l)
		}
	}
	slices.SortStableFunc(r.Lines, func(a, b Line) int { return cmp.Compare(b.Sigmas, a.Sigmas) })
	if len(r.Lines) > f.s.MaxLines {
		r.Lines, r.Truncated = r.Lines[:f.s.MaxLines], true
	}
}
