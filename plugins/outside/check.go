package outside

import (
	"fmt"
	"math"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/proto/stagepb"
)

// made is an answer that has passed the checks.
type made struct {
	region       *pipeline.Region
	geometry     pipeline.Geometry
	planes       map[string]pipeline.NamedPlane
	measurements []pipeline.Measurement
	proofs       []pipeline.Proof
	defects      []pipeline.Defect
	replace      bool
	coverage     *pipeline.Coverage
	coverageMap  *pipeline.CoverageMap
	grid         *raster.Grid
	bad, hot     *raster.Mask
	truncated    bool
	hold         string
}

// checker holds an answer against the item it is for. An answer can add to what is
// known and can hold; it cannot take anything away, and there is no word for accept.
type checker struct {
	described      *stagepb.DescribeResponse
	minRegionShare float64
	item           *pipeline.Item
	fetch          stagepb.Fetch
	res            *stagepb.RunResponse
	m              made
}

func (a *checker) check(res *stagepb.RunResponse) (made, error) {
	a.res = res
	a.m.truncated, a.m.hold = res.GetTruncated(), shorten(res.GetHold())
	err := firstError(a.onlyDeclared, a.numbers, a.masks, a.place, a.planes, a.cells, a.coverage, a.defects)
	return a.m, err
}

func shorten(s string) string {
	const longest = 500
	if r := []rune(s); len(r) > longest {
		return string(r[:longest]) + "…"
	}
	return s
}

// onlyDeclared refuses what the stage did not say it writes.
func (a *checker) onlyDeclared() error {
	for _, w := range []struct {
		given bool
		name  string
	}{
		{a.res.GetRegion() != nil, stagepb.ReadsRegion}, {a.res.GetGeometry() != nil, "geometry"}, {a.res.GetCoverage() != nil, "coverage"},
		{len(a.res.GetDefects()) > 0 || a.res.GetReplaceDefects(), stagepb.ReadsDefects},
		{a.res.GetBadPixels() != nil, stagepb.ReadsBadPixels}, {a.res.GetSaturatedPixels() != nil, stagepb.ReadsSaturatedPixels},
		{a.res.GetGrid() != nil, stagepb.ReadsGrid}, {a.res.GetCoverageMap() != nil, stagepb.ReadsCoverageMap},
	} {
		if w.given && !a.writes(w.name) {
			return fmt.Errorf("it wrote %s, but says that it writes %q", w.name, a.described.GetWrites())
		}
	}
	return nil
}

func (a *checker) writes(name string) bool { return slices.Contains(a.described.GetWrites(), name) }

// Bounds on lists that no honest stage comes near.
const (
	maxNumbers = 1000
	maxPlanes  = 16
	maxWord    = 64
)

func (a *checker) numbers() error {
	a.m.measurements, a.m.proofs = stagepb.ToMeasurements(a.res.GetMeasurements()), stagepb.ToProofs(a.res.GetProofs())
	if n := len(a.m.measurements) + len(a.m.proofs); n > maxNumbers {
		return fmt.Errorf("it gave %d measurements and proofs, want at most %d", n, maxNumbers)
	}
	for _, m := range a.m.measurements {
		if !finite(m.Value) || m.Name == "" || len(m.Name) > maxWord || len(m.Unit) > maxWord {
			return fmt.Errorf("measurement %q is %g %q, want a name and a finite number", shorten(m.Name), m.Value, shorten(m.Unit))
		}
	}
	for i, p := range a.m.proofs {
		a.m.proofs[i].Reason = shorten(p.Reason)
		switch {
		case !finite(p.Value, p.Low, p.High) || p.Name == "" || len(p.Name) > maxWord:
			return fmt.Errorf("proof %q is %g within %g to %g, want a name and finite numbers", shorten(p.Name), p.Value, p.Low, p.High)
		case p.OK && !(p.Low <= p.Value && p.Value <= p.High):
			return fmt.Errorf("proof %q says ok, but %g is not within %g to %g", p.Name, p.Value, p.Low, p.High)
		case !p.OK && p.Reason == "":
			return fmt.Errorf("proof %q failed without a reason", p.Name)
		}
	}
	return nil
}

func finite(values ...float64) bool {
	for _, v := range values {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return false
		}
	}
	return true
}

// size returns the width and height of the view in px; 0 where nothing says them.
func (a *checker) size() (int, int) {
	switch {
	case len(a.item.Frames) > 0:
		return a.item.Frames[0].Raw.Width, a.item.Frames[0].Raw.Height
	case a.item.Region != nil:
		return a.item.Region.Size()
	}
	return 0, 0
}

func (a *checker) sized(what string, width, height int) error {
	if w, h := a.size(); w != 0 && (w != width || h != height) {
		return fmt.Errorf("%s: got %d × %d px, the frame has %d × %d", what, width, height, w, h)
	}
	return nil
}

// masks may grow only.
func (a *checker) masks() error {
	for _, k := range []struct {
		name string
		from *stagepb.Mask
		was  *raster.Mask
		to   **raster.Mask
	}{{"bad pixels", a.res.GetBadPixels(), a.item.BadMask, &a.m.bad}, {"saturated pixels", a.res.GetSaturatedPixels(), a.item.SaturatedAt, &a.m.hot}} {
		mask, err := stagepb.ToMask(k.from)
		if mask == nil && err == nil {
			continue
		}
		if err == nil {
			err = a.sized(k.name, mask.Width, mask.Height)
		}
		if err != nil {
			return fmt.Errorf("%s: %w", k.name, err)
		}
		if kept, all := overlap(k.was, mask); kept < all {
			return fmt.Errorf("%s: %d of %d that were marked before are not marked any more", k.name, all-kept, all)
		}
		*k.to = mask
	}
	return nil
}

// overlap returns how many pixels of was are in is too, and how many was has.
func overlap(was, is *raster.Mask) (kept, all int) {
	if was == nil {
		return 0, 0
	}
	for i, in := range was.Bits {
		if in {
			all++
			if i < len(is.Bits) && is.Bits[i] {
				kept++
			}
		}
	}
	return kept, all
}

func (a *checker) planes() error {
	list := a.res.GetPlanes()
	if len(list) > maxPlanes {
		return fmt.Errorf("it wrote %d planes, want at most %d", len(list), maxPlanes)
	}
	for _, p := range list {
		if p.GetName() == pipeline.RawPlane || !a.writes(p.GetName()) {
			return fmt.Errorf("it wrote the plane %q, but says that it writes %q", shorten(p.GetName()), a.described.GetWrites())
		}
		if !finite(p.GetOriginX(), p.GetOriginY(), p.GetStep()) || p.GetStep() < 0 || len(p.GetUnit()) > maxWord {
			return fmt.Errorf("plane %q: origin (%g, %g), step %g, want finite numbers and a step above 0", p.GetName(), p.GetOriginX(), p.GetOriginY(), p.GetStep())
		}
	}
	var err error
	if a.m.planes, err = stagepb.ToPlanes(list, a.fetch); err != nil {
		return err
	}
	for name, p := range a.m.planes {
		if i := notFinite(p.Pixels.Pix); i >= 0 {
			return fmt.Errorf("plane %q: pixel (%d, %d) is %g, want finite numbers", name, i%p.Pixels.Stride, i/p.Pixels.Stride, p.Pixels.Pix[i])
		}
	}
	return nil
}

// notFinite returns the index of the first value that is no number or infinite, or −1.
func notFinite(values []float32) int {
	const exponent = 0x7f800000
	for i, v := range values {
		if math.Float32bits(v)&exponent == exponent {
			return i
		}
	}
	return -1
}

// failing reports whether the answer holds the unit anyway.
func (a *checker) failing() bool {
	return a.m.hold != "" || slices.ContainsFunc(a.m.proofs, func(p pipeline.Proof) bool { return !p.OK })
}
