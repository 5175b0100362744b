package main

import (
	"math"
	"math/rand/v2"

	"lapgate/pipeline"
	"lapgate/pipeline/render"
)

// fault is one way in which a unit must not be accepted.
type fault struct {
	name    string
	spoil   *render.Spoiler                                     // what the renderer does to each unit
	add     func(u *render.Unit, r *rand.Rand)                  // what lies on each unit
	tamper  func(views, before []pipeline.View) []pipeline.View // what happens to the frames; before is the last unit's
	causes  []string                                            // of which a reason must hold one
	passes  bool                                                // nothing is wrong: the unit may be accepted
	unitOne bool                                                // the first unit is as it should be and is not counted
}

func spoiled(name, kind string, value float64, causes ...string) fault {
	return fault{name: name, spoil: &render.Spoiler{Kind: kind, Value: value}, causes: causes}
}

func dig(name string, mm float64) fault {
	return fault{name: name, causes: []string{"dig too large", "dig hidden by a brighter one", "stain too large"}, add: func(u *render.Unit, r *rand.Rand) {
		a, d := 2*math.Pi*r.Float64(), (3800-mm*500)*math.Sqrt(r.Float64())
		u.Add(render.Object{Kind: pipeline.Dig, UUM: d * math.Cos(a), VUM: d * math.Sin(a), DiameterUM: mm * 1000, BrightnessDN: 35 + 75*r.Float64()})
	}}
}

// blurSigmaPx is a blur of 0.7 px and a defocus of twice that, in quadrature.
const blurSigmaPx = 1.565

// faults lists all, the good units last.
func faults() []fault {
	return []fault{
		spoiled("lamp at 0 %", render.SpoilLamp, 0, "lamp is off"),
		spoiled("lamp at 30 %", render.SpoilLamp, 0.3, "lamp is weak"),
		spoiled("lamp at 60 %", render.SpoilLamp, 0.6, "lamp is weak"),
		spoiled("cap on", render.SpoilCap, 0, "lens is capped"),
		spoiled("empty nest", render.SpoilEmptyNest, 0, "part not found"),
		spoiled("wrong diameter", render.SpoilDiameter, 8.5, "another part"),
		spoiled("upside down", render.SpoilMatt, 90, "matt"),
		spoiled("defocus of 2 blur widths", render.SpoilDefocus, blurSigmaPx, "check focus"),
		spoiled("black band", render.SpoilBlackBand, 0.1, "lines were not transferred"),
		{name: "repeated frame", tamper: repeated, causes: []string{"frame is repeated"}, unitOne: true},
		{name: "swapped views", tamper: swapped, causes: []string{"views are swapped"}},
		{name: "wrong exposure in the header", tamper: exposed, causes: []string{"exposure_us: got 1500"}},
		spoiled("camera shifted by 2 px", render.SpoilShift, 2, "read-out window moved"),
		spoiled("matt disc", render.SpoilMatt, 45, "matt"),
		spoiled("quarter-surface stain", render.SpoilQuarterStain, 15, "stain"),
		spoiled("fingerprint", render.SpoilFingerprint, 12, "print", "stain too large"),
		spoiled("broken segment", render.SpoilBroken, 1.2, "found the edge in", "stain too large"),
		dig("dig of 0.5 mm", 0.5),
		dig("dig of 1 mm", 1),
		dig("dig of 3 mm", 3),
		spoiled("grain that hides the limit", render.SpoilGrain, 15, "noise"),
		spoiled("oil film", render.SpoilOilFilm, 4, "film", "stain too large"),
		{name: "nothing wrong", passes: true},
	}
}

// repeated replaces the pixels of each view by those of the unit before.
func repeated(views, before []pipeline.View) []pipeline.View {
	if before == nil {
		return views
	}
	for i := range views {
		f := &views[i].Frames[0]
		f.Raw, f.Header.CRC32C = before[i].Frames[0].Raw, before[i].Frames[0].Header.CRC32C
	}
	return views
}

// swapped gives the first view the pixels of the second and the other way round.
func swapped(views, _ []pipeline.View) []pipeline.View {
	a, b := &views[0].Frames[0], &views[1].Frames[0]
	a.Raw, b.Raw = b.Raw, a.Raw
	a.Header.CRC32C, b.Header.CRC32C = b.Header.CRC32C, a.Header.CRC32C
	return views
}

func exposed(views, _ []pipeline.View) []pipeline.View {
	for i := range views {
		views[i].Frames[0].Header.ExposureUS = 1500
	}
	return views
}
