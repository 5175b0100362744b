package main

import (
	"cmp"
	"fmt"
	"io"
	"slices"

	"lapgate/pipeline"
)

// tileChoice is one set of settings with what it reaches on the choose side.
type tileChoice struct {
	marginPx, gridPx int
	leastWidthPx     float64 // of a blowhole: lines of the grinding are thinner,
	mostLengthPx     float64 // and longer; 0 = any
	area             float64 // AUROC, Blowhole against Free
	kLow, limit      float64
	pixelF1          float64
}

// chooseTiles finds margin, grid and shape by the highest AUROC on the choose side, then k_low
// and limit by the highest pixel F1 over its Blowhole and Free pictures; of a tie the
// first tried.
func chooseTiles(o options, out io.Writer) error {
	var tried []tileChoice
	for _, margin := range []int{12, 16} {
		for _, grid := range []int{20, 24, 28, 32, 48} {
			tiles, err := chooseSide(o, margin, grid, 3)
			if err != nil {
				return err
			}
			tried = append(tried, sweepShapes(tiles, tileChoice{marginPx: margin, gridPx: grid})...)
		}
	}
	slices.SortStableFunc(tried, func(a, b tileChoice) int { return cmp.Compare(b.area, a.area) })
	fmt.Fprintln(out, "margin_px grid_px least width most length AUROC")
	for _, c := range tried[:20] {
		fmt.Fprintf(out, "%9d %7d %11g %11g %.3f\n", c.marginPx, c.gridPx, c.leastWidthPx, c.mostLengthPx, c.area)
	}
	best := tried[0]
	tried = nil
	for _, low := range []float64{2.5, 3, 3.5, 4, 5, 6} {
		tiles, err := chooseSide(o, best.marginPx, best.gridPx, low)
		if err != nil {
			return err
		}
		tiles = append(ofClass(tiles, "Blowhole"), ofClass(tiles, "Free")...)
		tried = append(tried, sweepPixels(tiles, tileChoice{leastWidthPx: best.leastWidthPx, mostLengthPx: best.mostLengthPx, kLow: low})...)
	}
	slices.SortStableFunc(tried, func(a, b tileChoice) int { return cmp.Compare(b.pixelF1, a.pixelF1) })
	fmt.Fprintln(out, "k_low limit pixel F1")
	for _, c := range tried[:10] {
		fmt.Fprintf(out, "%5g %5g %.3f\n", c.kLow, c.limit, c.pixelF1)
	}
	return nil
}

func chooseSide(o options, margin, grid int, low float64) ([]tile, error) {
	t, choose, _, err := newTileSet(o, func(r *pipeline.Recipe) { setAll(r, grid, low, low) })
	if err != nil {
		return nil, err
	}
	defer t.line.Close()
	t.margin = margin
	return t.inspect(append(ofPictures(choose, "Blowhole"), ofPictures(choose, "Free")...))
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
func (c tileChoice) shaped(d pipeline.Defect) bool {
	return d.WidthPx >= c.leastWidthPx && (c.mostLengthPx == 0 || d.LengthPx <= c.mostLengthPx)
}

func sweepShapes(tiles []tile, at tileChoice) []tileChoice {
	var out []tileChoice
	for _, at.leastWidthPx = range []float64{0, 3, 4, 5} {
		for _, at.mostLengthPx = range []float64{0, 80, 40, 30} {
			top := map[string][]float64{}
			for _, t := range tiles {
				best := 0.0
				for _, d := range t.result.Item.Defects {
					if at.shaped(d) {
						best = max(best, d.PeakSigma)
					}
				}
				top[t.class] = append(top[t.class], best)
			}
			at.area = auroc(top["Blowhole"], top["Free"])
			out = append(out, at)
		}
	}
	return out
}

func sweepPixels(tiles []tile, at tileChoice) []tileChoice {
	var out []tileChoice
	for limit := 6.0; limit <= 30; limit++ {
		c := at
		c.limit = limit
		var sum pixelScore
		for _, t := range tiles {
			sum = sum.plus(t.pixelScore(func(d pipeline.Defect) bool { return c.shaped(d) && d.PeakSigma > limit }))
		}
		c.pixelF1 = sum.f1()
		out = append(out, c)
	}
	return out
}
