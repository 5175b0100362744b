package proof

import (
	"fmt"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// hotPixel is a pixel that stands this much above its neighbours without light.
type hotPixel struct {
	x, y    int
	aboveDN float32
}

const (
	leastPattern = 8   // hot pixels without which there is no pattern to look for
	mostPattern  = 500 // the strongest that are looked at
	leastAboveDN = 10  // and at least 10 sigmas of dark noise
	patternReach = 6   // px, how far a moved window is followed
	keepsOfDark  = 0.3 // of its dark value a hot pixel must still show: a cooler sensor shows less
)

// hotPixels lists the pixels of the calibration that a frame must show, the strongest
// first.
func hotPixels(c *pipeline.Calibration) []hotPixel {
	if c.Dark == nil {
		return nil
	}
	least := max(leastAboveDN, 10*float32(c.Noise.DarkDN))
	var out []hotPixel
	for y := 1; y+1 < c.Dark.Height; y++ {
		row := c.Dark.Row(y)
		for x := 1; x+1 < c.Dark.Width; x++ {
			if row[x]-row[x-1] < least && row[x]-row[x+1] < least {
				continue // cheap look before the median
			}
			if above := aboveNeighbours(c.Dark, x, y); above >= least {
				out = append(out, hotPixel{x, y, above})
			}
		}
	}
	slices.SortStableFunc(out, func(a, b hotPixel) int {
		switch {
		case a.aboveDN > b.aboveDN:
			return -1
		case a.aboveDN < b.aboveDN:
			return 1
		}
		return 0
	})
	return out[:min(len(out), mostPattern)]
}

// aboveNeighbours is a pixel less the median of the eight around it.
func aboveNeighbours(p *raster.Plane, x, y int) float32 {
	var n [8]float32
	k := 0
	for dy := -1; dy <= 1; dy++ {
		for dx := -1; dx <= 1; dx++ {
			if dx != 0 || dy != 0 {
				n[k] = p.At(x+dx, y+dy)
				k++
			}
		}
	}
	slices.Sort(n[:])
	return p.At(x, y) - (n[3]+n[4])/2
}

// provePattern holds the frame against the calibration's hot pixels; where too few are in
// place it says where they lie instead.
func (st *stage) provePattern(item *pipeline.Item, raw *raster.Plane) {
	if len(st.pattern) < leastPattern || !raw.SameSize(item.Calibration.Dark) {
		return
	}
	top := float32(item.Frames[0].Raw.Format.MaxCount())
	proof := pipeline.Proof{Name: pipeline.ProofPattern, Low: st.s.MinPatternShare, High: 1, Unit: "1"}
	proof.Value = shareInPlace(raw, st.pattern, 0, 0, top)
	proof.OK = proof.Value >= proof.Low
	if !proof.OK {
		proof.Reason = fmt.Sprintf("%.0f %% of the calibration's %d hot pixels are where they should be, want %.0f %%: %s",
			100*proof.Value, len(st.pattern), 100*proof.Low, st.moved(raw, top))
	}
	item.Prove(proof)
}

func (st *stage) moved(raw *raster.Plane, top float32) string {
	for reach := 1; reach <= patternReach; reach++ {
		for dy := -reach; dy <= reach; dy++ {
			for dx := -reach; dx <= reach; dx++ {
				if shareInPlace(raw, st.pattern, dx, dy, top) >= st.s.MinPatternShare {
					return fmt.Sprintf("they lie (%+d, %+d) px from there, so the read-out window moved; calibrate again", dx, dy)
				}
			}
		}
	}
	return "another camera or another read-out window; calibrate again"
}

// shareInPlace returns which share of the hot pixels stands out at an offset. Those that
// the light saturates say nothing.
func shareInPlace(raw *raster.Plane, pattern []hotPixel, dx, dy int, top float32) float64 {
	in, n := 0., 0.
	for _, h := range pattern {
		x, y := h.x+dx, h.y+dy
		if x < 1 || y < 1 || x+1 >= raw.Width || y+1 >= raw.Height {
			continue
		}
		above := aboveNeighbours(raw, x, y)
		if raw.At(x, y)-above+h.aboveDN*keepsOfDark >= top {
			continue
		}
		n++
		if above >= keepsOfDark*h.aboveDN {
			in++
		}
	}
	if n == 0 {
		return 1
	}
	return in / n
}
