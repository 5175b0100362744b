package main

import (
	"context"
	"math"
	"slices"
	"testing"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/pipeline/render"
	"lapgate/plugins/blobs"
)

// detected is the defects of one unit of a scene, with the unit's truth.
type detected struct {
	unit    render.Unit
	item    *pipeline.Item
	umPerPx float64
}

// bench is the reference chain with one calibration, for the detection scene at any power.
type bench struct {
	scene render.Scene
	chain *chain
	blobs pipeline.Stage
}

func newBench(t *testing.T) bench {
	t.Helper()
	s, _, err := configs.Load[render.Scene]("../../testdata/scenes/detect.yaml")
	if err != nil {
		t.Fatal(err)
	}
	s.Calibration = render.CalibrationFrames{Dark: 8, Stray: 4, Response: 8}
	r, err := render.New(s)
	if err != nil {
		t.Fatal(err)
	}
	c, err := newChain(r, "ring")
	if err != nil {
		t.Fatal(err)
	}
	find, _, err := blobs.Factory.New(nil, pipeline.Environment{})
	if err != nil {
		t.Fatal(err)
	}
	return bench{s, c, find}
}

// detect runs the chain over units of the scene at a lamp power.
func (b bench) detect(t *testing.T, power float64, numbers ...int) []detected {
	t.Helper()
	s := b.scene
	s.Lamp = render.Lamp{MinPower: power, MaxPower: power}
	r, err := render.New(s)
	if err != nil {
		t.Fatal(err)
	}
	var out []detected
	for _, n := range numbers {
		unit := r.Unit(n)
		shot, err := r.Frame(&unit, "ring")
		if err != nil {
			t.Fatal(err)
		}
		item, err := b.chain.run(shot)
		if err != nil {
			t.Fatal(err)
		}
		if err := b.blobs.Run(context.Background(), item); err != nil {
			t.Fatal(err)
		}
		out = append(out, detected{unit, item, s.Camera.UMPerPx})
	}
	return out
}

// match is a dig of the truth with the defect nearest to it.
type match struct {
	object   render.Object
	defect   pipeline.Defect
	distance float64 // px
	truePx   float64 // diameter
}

// digs returns the isolated digs in the region whose peak is at 8 or more sigmas of one
// pixel, and how many defects lie on no object at all.
func (d detected) digs() (matches []match, nowhere int) {
	for _, o := range d.unit.Objects {
		s := o.Sightings[0]
		if _, in := d.item.Region.ZoneAt(s.XPx, s.YPx); in && o.Isolated && s.PeakSigma >= 8 {
			m := match{object: o, distance: math.Inf(1), truePx: o.DiameterUM / d.umPerPx}
			for _, f := range d.item.Defects {
				if r := math.Hypot(f.XPx-s.XPx, f.YPx-s.YPx); r < m.distance {
					m.defect, m.distance = f, r
				}
			}
			matches = append(matches, m)
		}
	}
	for _, f := range d.item.Defects {
		if !slices.ContainsFunc(d.unit.Objects, func(o render.Object) bool {
			s := o.Sightings[0]
			return math.Hypot(f.XPx-s.XPx, f.YPx-s.YPx) < o.DiameterUM/d.umPerPx/2+3
		}) {
			nowhere++
		}
	}
	return matches, nowhere
}

func middle(v []float64) float64 {
	v = slices.Sorted(slices.Values(v))
	return v[len(v)/2]
}

func TestDetectionScene(t *testing.T) {
	b := newBench(t)
	units := b.detect(t, 1, 0, 133, 266)
	t.Run("digs", func(t *testing.T) { digsAreFound(t, units) })
	t.Run("lamp", func(t *testing.T) { diametersDoNotFollowTheLamp(t, b, units[0]) })
}

// A surface with lay, uneven haze, a bright rim and hot pixels: at least 99 % of the digs
// are found, their centres to 0.15 px, diameters of 6 px and more to 10 % (medians), and
// nothing else.
func digsAreFound(t *testing.T, units []detected) {
	found, total := 0, 0
	var off, size []float64
	for _, d := range units {
		matches, nowhere := d.digs()
		if nowhere > 0 {
			t.Errorf("unit %s: %d defects on no object", d.unit.Identity.Unit, nowhere)
		}
		for _, m := range matches {
			total++
			if m.distance > 2 {
				continue
			}
			found++
			off = append(off, m.distance)
			if m.truePx >= 6 {
				size = append(size, math.Abs(m.defect.DiameterPx/m.truePx-1))
			}
		}
		if d.item.Coverage.Share < 0.999 {
			t.Errorf("coverage %+v", d.item.Coverage)
		}
	}
	if total < 25 || float64(found) < 0.99*float64(total) || middle(off) > 0.15 || middle(size) > 0.10 {
		t.Errorf("found %d of %d; centre off by %.3f px, diameter by %.3f (medians)", found, total, middle(off), middle(size))
	}
}

// Lamp at half and at one and a half times its power: diameters change by less than 5 %.
func diametersDoNotFollowTheLamp(t *testing.T, b bench, nominal detected) {
	full, _ := nominal.digs()
	for _, power := range []float64{0.5, 1.5} {
		other, _ := b.detect(t, power, nominal.unit.Index)[0].digs()
		var change []float64
		for _, m := range full {
			i := slices.IndexFunc(other, func(o match) bool { return o.object.DiameterUM == m.object.DiameterUM })
			if i >= 0 && m.truePx >= 6 && !m.defect.Saturated && !other[i].defect.Saturated {
				change = append(change, math.Abs(other[i].defect.DiameterPx/m.defect.DiameterPx-1))
			}
		}
		if len(change) < 3 || middle(change) > 0.05 {
			t.Errorf("power %g: %d digs change by %.3f", power, len(change), change)
		}
	}
}
