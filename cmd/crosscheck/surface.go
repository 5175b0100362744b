package main

import (
	"slices"

	"lapgate/pipeline/render"
)

// surface is what lies under the digs of a scene.
type surface struct {
	name string
	lay  func(render.Scene) render.Scene // puts it into a scene
}

// surfaces lists them from the easiest: noise of which neighbours know nothing, then a
// texture that is slow, then one as fine as the defects.
func surfaces() []surface {
	return []surface{
		{"white", func(s render.Scene) render.Scene {
			return changed(s, func(p *render.Process) {
				p.HazeTexture, p.Lay = 0, render.Lay{Pattern: render.LayNone}
				p.HazeDN = render.Distribution{Value: 12}
			}, 0)
		}},
		{"haze", func(s render.Scene) render.Scene {
			return changed(s, func(p *render.Process) { p.Lay = render.Lay{Pattern: render.LayNone} }, s.Views[0].Vignetting)
		}},
		{"lay", func(s render.Scene) render.Scene {
			return changed(s, func(p *render.Process) { p.Lay.AmplitudeDN = render.Distribution{Value: 0.8} }, s.Views[0].Vignetting)
		}},
	}
}

// changed returns a copy of a scene with another surface, with more digs, down to those that
// nobody should see, and with scratches.
func changed(s render.Scene, change func(*render.Process), vignetting float64) render.Scene {
	s.Views, s.Processes = slices.Clone(s.Views), slices.Clone(s.Processes)
	s.Views[0].Vignetting = vignetting
	s.Calibration = render.CalibrationFrames{Dark: 8, Stray: 4, Response: 8}
	for i := range s.Processes {
		p := &s.Processes[i]
		dig := p.Populations[0]
		faint, scratch := dig, dig
		dig.PerUnit = 40
		faint.PerUnit, faint.PeakSigma = 40, render.Distribution{Shape: render.ShapeUniform, Min: 2, Max: 10}
		scratch.Kind, scratch.PerUnit = "scratch", 8
		scratch.SizeUM = render.Distribution{Shape: render.ShapeUniform, Min: 20, Max: 60}
		scratch.LengthUM = render.Distribution{Shape: render.ShapeUniform, Min: 800, Max: 4000}
		scratch.PeakSigma = render.Distribution{Shape: render.ShapeUniform, Min: 10, Max: 60}
		p.Populations = []render.Population{dig, faint, scratch}
		change(p)
	}
	return s
}
