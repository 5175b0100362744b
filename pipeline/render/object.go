package render

import (
	"math"
	"slices"

	"lapgate/pipeline"
)

// Object is one imperfection that was drawn, or a grain of dust or a fibre that lay on
// the part. Lengths are those of the drawn shape before blur.
type Object struct {
	ID           int           `json:"id"` // from 1 within the unit
	Kind         pipeline.Kind `json:"kind"`
	UUM          float64       `json:"u_um"` // µm from the part's centre as it lay, v up
	VUM          float64       `json:"v_um"`
	PartUUM      float64       `json:"part_u_um"` // turned back by the part's angle
	PartVUM      float64       `json:"part_v_um"`
	DiameterUM   float64       `json:"diameter_um"` // dig, stain; particle: of the circle with its area
	LengthUM     float64       `json:"length_um"`   // scratch, fibre: along it; edge chip: along the edge
	WidthUM      float64       `json:"width_um"`    // scratch, fibre; edge chip: inwards
	AngleDeg     float64       `json:"angle_deg"`   // long axis at its middle, from +x towards +y in a view that neither turns nor mirrors
	BendPerMM    float64       `json:"bend_per_mm"` // curvature
	BrightnessDN float64       `json:"brightness_dn"`
	Isolated     bool          `json:"isolated"` // nothing else, and no edge of the clear aperture, is near: see IsolationPx
	Sightings    []Sighting    `json:"views"`
	shape        uint64        // seeds the outline of irregular shapes
}

// Sighting is an object as one view shows it.
type Sighting struct {
	View         string  `json:"view"`
	XPx          float64 `json:"x_px"`
	YPx          float64 `json:"y_px"`
	AngleDeg     float64 `json:"angle_deg"`     // from +x towards +y in this view's pixels
	PeakDN       float64 `json:"peak_dn"`       // noise-free, above the background; negative where it takes light away
	PeakSigma    float64 `json:"peak_sigma"`    // PeakDN over SigmaDN
	FluxDNPx     float64 `json:"flux_dn_px"`    // sum of all pixels, noise-free
	BackgroundDN float64 `json:"background_dn"` // noise-free light without objects, at the peak
	SigmaDN      float64 `json:"sigma_dn"`      // temporal noise of one raw pixel at BackgroundDN
}

func (o Object) long() bool { return o.Kind == pipeline.Scratch || o.Kind == pipeline.Fibre }

// see keeps a sighting in place of an earlier one of the same view.
func (o *Object) see(s Sighting) {
	out := slices.DeleteFunc(slices.Clone(o.Sightings), func(old Sighting) bool { return old.View == s.View })
	o.Sightings = append(out, s)
}

// irregular is how far an irregular outline may stand out, relative to its mean radius.
const irregular = 1.5

// stainReach is how far a stain is drawn, relative to its radius: to 1e−4 of its middle.
const stainReach = 1.92

// reachUM is the radius of a circle about the middle that holds the whole object.
func (o Object) reachUM() float64 {
	switch o.Kind {
	case pipeline.Scratch, pipeline.Fibre:
		return o.LengthUM/2 + o.WidthUM/2
	case pipeline.EdgeChip:
		return irregular * max(o.LengthUM/2, o.WidthUM)
	case pipeline.Particle:
		return irregular * o.DiameterUM / 2
	case pipeline.Stain:
		return stainReach * o.DiameterUM / 2
	}
	return o.DiameterUM / 2
}

// spine returns points along a long object, at most stepUM apart, as (u, v); the
// middle alone for others.
func (o Object) spine(stepUM float64) [][2]float64 {
	if !o.long() {
		return [][2]float64{{o.UUM, o.VUM}}
	}
	n := int(math.Ceil(o.LengthUM/stepUM)) + 1
	out := make([][2]float64, n)
	for i := range out {
		out[i] = o.at(o.LengthUM * (float64(i)/float64(max(n-1, 1)) - 0.5))
	}
	return out
}

// at returns the point sUM along the object from its middle.
func (o Object) at(sUM float64) [2]float64 {
	sin, cos := math.Sincos(-o.AngleDeg * math.Pi / 180)
	along, across := sUM, 0.0
	if k := o.BendPerMM / 1000; k != 0 {
		along, across = math.Sin(k*sUM)/k, (1-math.Cos(k*sUM))/k
	}
	return [2]float64{o.UUM + cos*along - sin*across, o.VUM + sin*along + cos*across}
}

// halfWidthUM is how far the object reaches to the sides of its spine.
func (o Object) halfWidthUM() float64 {
	if o.long() {
		return o.WidthUM / 2
	}
	return o.reachUM()
}

// IsolationPx is the clear space between the outlines of an isolated object and any
// other, and to the edge of the clear aperture.
const IsolationPx = 16

// markIsolated sets Isolated on every object.
func markIsolated(objects []Object, part Part, umPerPx float64) {
	gap := IsolationPx * umPerPx
	for i := range objects {
		o := &objects[i]
		o.Isolated = o.Kind != pipeline.EdgeChip && clearOfEdge(*o, part, gap) && clearOfOthers(objects, i, gap)
	}
}

func clearOfEdge(o Object, part Part, gap float64) bool {
	for _, p := range o.spine(gap) {
		if math.Hypot(p[0], p[1])+o.halfWidthUM()+gap > part.ClearApertureMM*500 {
			return false
		}
	}
	return true
}

func clearOfOthers(objects []Object, i int, gap float64) bool {
	o := objects[i]
	for j, other := range objects {
		middle := math.Hypot(o.UUM-other.UUM, o.VUM-other.VUM)
		if j == i || middle > o.reachUM()+other.reachUM()+gap {
			continue
		}
		if spineDistance(o, other, gap/2)-o.halfWidthUM()-other.halfWidthUM() < gap {
			return false
		}
	}
	return true
}

func spineDistance(a, b Object, step float64) float64 {
	best := math.Inf(1)
	for _, p := range a.spine(step) {
		for _, q := range b.spine(step) {
			best = min(best, math.Hypot(p[0]-q[0], p[1]-q[1]))
		}
	}
	return best
}
