package main

import (
	"cmp"
	"fmt"
	"io"
	"slices"

	"lapgate/pipeline"
	"lapgate/plugins/region"
)

// tileChoice is one set of settings with what it reaches on the choose side.
type tileChoice struct {
	tileSettings
	area    float64 // AUROC, Blowhole against Free
	limit   float64 // sigma
	pixelF1 float64
}

// tileSettings are what is tried.
type tileSettings struct {
	rimPx, gridPx int
	mostLengthPx  float64 // of a blowhole; 0 = any
	kLow          float64
}

// chooseK is k_low and k_high while rim, grid and shape are chosen.
const chooseK = 3.5

// inspector inspects one set of pictures with one rim, grid and k_low.
type inspector func(rimPx, gridPx int, kLow float64) ([]tile, error)

// chooseTiles prints the tables from which the recipe is chosen.
func chooseTiles(o options, out io.Writer) error {
	_, err := choiceOf(func(rim, grid int, low float64) ([]tile, error) { return chooseSide(o, rim, grid, low) }, out)
	return err
}

// choiceOf is the rule of the choice, on the Blowhole and Free pictures of a set: rim, grid
// and shape by the highest AUROC, then k_low by the highest pixel F1, each with the limit
// that rejects at most tilesFalseAlarms of the Free ones; of a tie the first tried.
func choiceOf(of inspector, out io.Writer) (tileChoice, error) {
	var tried []tileChoice
	for _, rim := range []int{3, 5, 7} {
		for _, grid := range []int{28, 40, 56} {
			tiles, err := of(rim, grid, chooseK)
			if err != nil {
				return tileChoice{}, err
			}
			tried = append(tried, sweepShapes(tiles, tileChoice{tileSettings: tileSettings{rimPx: rim, gridPx: grid}})...)
		}
	}
	slices.SortStableFunc(tried, func(a, b tileChoice) int { return cmp.Compare(b.area, a.area) })
	fmt.Fprintln(out, "rim_px grid_px most length AUROC")
	for _, c := range tried[:20] {
		fmt.Fprintf(out, "%6d %7d %11g %.3f\n", c.rimPx, c.gridPx, c.mostLengthPx, c.area)
	}
	return tried[0].lowest(of, out)
}

// lowest chooses k_low and the limit for a rim, grid and shape.
func (c tileChoice) lowest(of inspector, out io.Writer) (tileChoice, error) {
	var tried []tileChoice
	for _, c.kLow = range []float64{2.5, 3, 3.5, 4, 5} {
		tiles, err := of(c.rimPx, c.gridPx, c.kLow)
		if err != nil {
			return c, err
		}
		tried = append(tried, c.withLimit(tiles))
	}
	slices.SortStableFunc(tried, func(a, b tileChoice) int { return cmp.Compare(b.pixelF1, a.pixelF1) })
	fmt.Fprintln(out, "k_low limit AUROC pixel F1")
	for _, c := range tried {
		fmt.Fprintf(out, "%5g %5.1f %.3f %.3f\n", c.kLow, c.limit, c.area, c.pixelF1)
	}
	return tried[0], nil
}

// chooseSide inspects the choose side's Blowhole and Free pictures.
func chooseSide(o options, rim, grid int, low float64) ([]tile, error) {
	t, choose, _, err := newTileSet(o, withSettings(rim, grid, low))
	if err != nil {
		return nil, err
	}
	defer t.line.Close()
	return t.inspect(append(ofPictures(choose, "Blowhole"), ofPictures(choose, "Free")...))
}

// withSettings sets rim, grid and thresholds in a recipe.
func withSettings(rim, grid int, low float64) func(*pipeline.Recipe) {
	return func(r *pipeline.Recipe) {
		setAll(r, grid, low, low)
		setRim(r, rim)
	}
}

func ofPictures(list []picture, class string) []picture {
	var out []picture
	for _, p := range list {
		if p.class == class {
			out = append(out, p)
		}
	}
	return out
}

// shaped reports whether a defect may be a blowhole.
func (c tileChoice) shaped(f found) bool {
	return c.mostLengthPx == 0 || f.lengthPx <= c.mostLengthPx
}

// strengths returns the largest peak_sigma of what may be a blowhole, by class.
func (c tileChoice) strengths(tiles []tile) map[string][]float64 {
	top := map[string][]float64{}
	for _, t := range tiles {
		best := 0.0
		for _, f := range t.found {
			if c.shaped(f) {
				best = max(best, f.peakSigma)
			}
		}
		top[t.class] = append(top[t.class], best)
	}
	return top
}

func sweepShapes(tiles []tile, at tileChoice) []tileChoice {
	var out []tileChoice
	for _, at.mostLengthPx = range []float64{0, 60, 40, 30} {
		top := at.strengths(tiles)
		at.area = auroc(top["Blowhole"], top["Free"])
		out = append(out, at)
	}
	return out
}

// withLimit sets the limit and what is reached with it.
func (c tileChoice) withLimit(tiles []tile) tileChoice {
	top := c.strengths(tiles)
	c.area = auroc(top["Blowhole"], top["Free"])
	c.limit = limitFor(top["Free"], tilesFalseAlarms)
	var sum pixelScore
	for _, t := range tiles {
		t.judgeBy(digs, c.limit, c.shaped)
		sum = sum.plus(t.score[digs])
	}
	c.pixelF1 = sum.f1()
	return c
}

// setRim sets the width of the rim in every region.
func setRim(r *pipeline.Recipe, rimPx int) {
	for v, view := range r.Views {
		for i, s := range view.Stages {
			if s.Type != region.Factory.Type {
				continue
			}
			decode := s.Decode
			r.Views[v].Stages[i].Decode = func(dst any) error {
				if err := decode(dst); err != nil {
					return err
				}
				dst.(*region.Settings).RimMM = float64(rimPx) / 1000 // at 1 um/px
				return nil
			}
		}
	}
}
