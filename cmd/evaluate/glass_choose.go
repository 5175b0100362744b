package main

import (
	"cmp"
	"fmt"
	"io"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/plugins/blobs"
	"lapgate/plugins/darkfield"
)

// glassChoice is one set of settings with what it reaches on the choose side. A merged
// defect is a mark when its measure, times the weight where the front view gave it, is
// above the limit.
type glassChoice struct {
	gridPx  int
	kLow    float64
	measure string
	weight  float64
	limit   float64
	score   boxScore
}

// glassMeasures are what a limit may be about.
var glassMeasures = []struct {
	name string
	of   func(pipeline.Defect) float64
	low  float64 // lowest limit tried; each next one is a tenth higher
}{
	{"peak_sigma", func(d pipeline.Defect) float64 { return d.PeakSigma }, 10},
	{"snr", func(d pipeline.Defect) float64 { return d.SNR }, 15},
	{"flux", func(d pipeline.Defect) float64 { return d.Flux }, 150},
	{"area_px", func(d pipeline.Defect) float64 { return float64(d.AreaPx) }, 20},
}

// chooseGlass tries every combination on the choose side and prints the best: highest
// F1, then fewest false defects, then first tried.
func chooseGlass(o options, out io.Writer) error {
	var tried []glassChoice
	pairs := 0
	for _, grid := range []int{64, 128} {
		for _, low := range []float64{3.5, 5, 7} {
			g, choose, _, err := newGlassSet(o, func(r *pipeline.Recipe) { setAll(r, grid, low, 8) })
			if err != nil {
				return err
			}
			found, err := g.inspect(choose)
			if err != nil {
				return err
			}
			pairs = len(found)
			tried = append(tried, g.sweep(found, glassChoice{gridPx: grid, kLow: low})...)
		}
	}
	slices.SortStableFunc(tried, func(a, b glassChoice) int {
		return cmp.Or(cmp.Compare(b.score.f1(), a.score.f1()), cmp.Compare(a.score.falses, b.score.falses))
	})
	fmt.Fprintln(out, "grid_px k_low measure     weight(front)     limit    F1 found missed false/picture")
	for _, c := range tried[:20] {
		fmt.Fprintf(out, "%7d %5g %-12s %12g %9.4g %.3f %5d %6d %.3f\n", c.gridPx, c.kLow, c.measure, c.weight, c.limit,
			c.score.f1(), c.score.found, c.score.missed, float64(c.score.falses)/float64(pairs))
	}
	return nil
}

// sweep tries measures, weights and limits on the merged defects.
func (g *glassSet) sweep(pairs []glassPair, at glassChoice) []glassChoice {
	credits := make([]credited, len(pairs))
	for i, p := range pairs {
		defects, pixels, _ := g.judge(p)
		credits[i] = creditsOf(p.truth, defects, pixels)
	}
	var out []glassChoice
	for _, m := range glassMeasures {
		for _, weight := range []float64{0.2, 0.3, 0.5, 0.7, 0.85, 1} {
			for k, limit := 0, m.low; k < 30; k, limit = k+1, limit*1.1 {
				c := at
				c.measure, c.weight, c.limit = m.name, weight, limit
				for _, p := range credits {
					c.score = c.score.plus(p.score(func(d pipeline.Defect) bool {
						if d.View == "front" {
							return weight*m.of(d) > limit
						}
						return m.of(d) > limit
					}))
				}
				out = append(out, c)
			}
		}
	}
	return out
}

// credited is the defects of a pair with the boxes that each of them touches.
type credited struct {
	boxes   int
	defects []pipeline.Defect
	touches [][]int
}

func creditsOf(truth []truthBox, defects []pipeline.Defect, pixels [][]raster.Span) credited {
	c := credited{boxes: len(truth), defects: defects, touches: make([][]int, len(defects))}
	for i := range defects {
		for k, b := range truth {
			if b.touches(pixels[i]) {
				c.touches[i] = append(c.touches[i], k)
			}
		}
	}
	return c
}

// score is scoreBoxes of the defects that are marks.
func (c credited) score(mark func(pipeline.Defect) bool) boxScore {
	found := make([]bool, c.boxes)
	s := boxScore{missed: c.boxes}
	for i, d := range c.defects {
		if !mark(d) {
			continue
		}
		if len(c.touches[i]) == 0 {
			s.falses++
		}
		for _, k := range c.touches[i] {
			if !found[k] {
				found[k] = true
				s.found, s.missed = s.found+1, s.missed-1
			}
		}
	}
	return s
}

// setAll lays grid and thresholds over all views of a recipe.
func setAll(r *pipeline.Recipe, grid int, low, high float64) {
	for _, v := range r.Views {
		for i, s := range v.Stages {
			inner := s.Decode
			v.Stages[i].Decode = func(dst any) error {
				if inner != nil {
					if err := inner(dst); err != nil {
						return err
					}
				}
				switch t := dst.(type) {
				case *darkfield.Settings:
					t.GridPx = grid
				case *blobs.Settings:
					t.KLow, t.KHigh = low, high
				}
				return nil
			}
		}
	}
}
