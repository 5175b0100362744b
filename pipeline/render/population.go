package render

import (
	"fmt"
	"math"
	"math/rand/v2"

	"lapgate/pipeline"
)

// Population is one sort of imperfection on the surfaces of a process. Give several
// populations of a kind for a mixture of sizes.
type Population struct {
	Kind    pipeline.Kind `yaml:"kind"`
	PerUnit float64       `yaml:"per_unit"` // mean number on a unit; the number is Poisson
	// SizeUM is the diameter of a dig, particle or stain, the width of a scratch or
	// fibre, and how far an edge chip reaches inwards.
	SizeUM   Distribution `yaml:"size_um"`
	LengthUM Distribution `yaml:"length_um"` // scratch and fibre: along it; edge chip: along the edge
	// BrightnessDN is what the imperfection adds to the light, before blur, at nominal
	// lamp power; a stain may take light away.
	BrightnessDN Distribution `yaml:"brightness_dn"`
	// PeakSigma states the brightness of digs and particles as the blurred peak over the
	// single-pixel noise on the unit's haze instead. Zero = BrightnessDN holds.
	PeakSigma Distribution `yaml:"peak_sigma"`
	BendPerMM Distribution `yaml:"bend_per_mm"` // scratch and fibre: curvature, either side
}

func (p Population) check(key string) error {
	kinds := []string{}
	for _, k := range pipeline.ScatteringKinds() {
		kinds = append(kinds, string(k))
	}
	err := firstBad(oneOf(key+"kind", string(p.Kind), kinds...), within(key+"per_unit", p.PerUnit, 0, 1000),
		p.SizeUM.check(key+"size_um"), p.LengthUM.check(key+"length_um"), p.BrightnessDN.check(key+"brightness_dn"),
		p.PeakSigma.check(key+"peak_sigma"), p.BendPerMM.check(key+"bend_per_mm"))
	if err != nil {
		return err
	}
	if p.SizeUM.max() <= 0 {
		return pipeline.Invalid("%ssize_um: got at most %g, want more than 0", key, p.SizeUM.max())
	}
	if p.long() || p.Kind == pipeline.EdgeChip {
		return atLeast(key+"length_um", p.LengthUM.max(), 1e-3)
	}
	return nil
}

func (s Scene) checkProcesses() error {
	if len(s.Processes) == 0 {
		return pipeline.Invalid("processes: got none, want at least one")
	}
	for i, p := range s.Processes {
		key := fmt.Sprintf("processes[%d].", i)
		if err := p.check(key); err != nil {
			return err
		}
	}
	return nil
}

func (p Process) check(key string) error {
	err := firstBad(pipeline.CheckID(key+"name", p.Name), atLeast(key+"share", p.Share, 1e-9), p.HazeDN.check(key+"haze_dn"),
		within(key+"haze_texture", p.HazeTexture, 0, 1), within(key+"rim_dn", p.RimDN, 0, 1e5), within(key+"rim_width_um", p.RimWidthUM, 0, 1e4),
		oneOf(key+"lay.pattern", p.Lay.Pattern, "", LayNone, LayConcentric, LayStraight), p.Lay.AmplitudeDN.check(key+"lay.amplitude_dn"))
	if err == nil && p.Lay.drawn() {
		err = atLeast(key+"lay.period_um", p.Lay.PeriodUM, 1e-3)
	}
	for i, pop := range p.Populations {
		err = firstBad(err, pop.check(fmt.Sprintf("%spopulations[%d].", key, i)))
	}
	return err
}

func (p Population) long() bool { return p.Kind == pipeline.Scratch || p.Kind == pipeline.Fibre }

// surface is what a unit's objects are drawn on.
type surface struct {
	part   Part
	camera Camera
	hazeDN float64
}

// draw returns the objects of one population on one unit, in part coordinates.
func (p Population) draw(r *rand.Rand, on surface, factor float64) []Object {
	out := []Object{}
	for range poisson(r, p.PerUnit*factor) {
		o := Object{Kind: p.Kind, shape: r.Uint64()}
		size, along := p.SizeUM.draw(r), p.LengthUM.draw(r)
		o.AngleDeg = foldDeg(180 * r.Float64())
		o.BrightnessDN = p.BrightnessDN.draw(r)
		sigma := p.PeakSigma.draw(r)
		bend := p.BendPerMM.draw(r)
		if r.Uint64()&1 == 0 {
			bend = -bend
		}
		switch {
		case p.long():
			o.WidthUM, o.LengthUM, o.BendPerMM = size, along, bend
		case p.Kind == pipeline.EdgeChip:
			o.WidthUM, o.LengthUM = size, along
		default:
			o.DiameterUM = size
		}
		if sigma > 0 {
			o.BrightnessDN = brightnessFor(sigma, size, on)
		}
		placeObject(r, &o, on.part)
		out = append(out, o)
	}
	return out
}

// brightnessFor returns the brightness of a disc whose blurred centre stands sigma
// single-pixel noises above the haze: the centre of a disc of radius r seen through a
// Gaussian s is 1 − exp(−r²/2s²), where s² includes the pixel's own 1/12.
func brightnessFor(sigma, diameterUM float64, on surface) float64 {
	r := diameterUM / on.camera.UMPerPx / 2
	share := 1 - math.Exp(-r*r/(2*on.camera.pointVariance(on.camera.BlurPx)))
	return sigma * on.camera.noiseDN(on.hazeDN) / share
}

// placeObject puts an object wholly inside the clear aperture, evenly over the area; a
// chip goes on the edge.
func placeObject(r *rand.Rand, o *Object, part Part) {
	azimuth, share := 2*math.Pi*r.Float64(), math.Sqrt(r.Float64())
	radius := (part.ClearApertureMM*500 - o.reachUM()) * share
	if o.Kind == pipeline.EdgeChip {
		// a half ellipse has its centroid at 4/3π of its depth
		radius = part.DiameterMM*500 - 4/(3*math.Pi)*o.WidthUM
		o.AngleDeg = foldDeg(-azimuth*180/math.Pi + 90)
	}
	o.PartUUM, o.PartVUM = max(radius, 0)*math.Cos(azimuth), max(radius, 0)*math.Sin(azimuth)
}

// foldDeg brings the angle of an axis into −90 < a ≤ 90.
func foldDeg(a float64) float64 {
	a = math.Mod(a, 180)
	switch {
	case a > 90:
		return a - 180
	case a <= -90:
		return a + 180
	}
	return a
}
