package raster

import "slices"

// LitPart returns the largest connected area of a frame that is not dark surroundings, with
// all that it encloses. Dark is what lies, in the mean of 5 × 5 pixels, below share times
// the level of the part, which is the median of the pixels brighter than the frame's mean.
// Surroundings are dark areas that reach the frame's edge. The mask is empty where the frame
// is of one level throughout.
func LitPart(src *Plane, share float64) *Mask {
	smooth := boxMean(src, 2)
	limit := float32(share) * litLevel(src)
	dark := NewMask(src.Width, src.Height)
	for i, v := range smooth.Pix {
		dark.Bits[i] = v <= limit
	}
	inside := NewMask(src.Width, src.Height)
	for i := range inside.Bits {
		inside.Bits[i] = true
	}
	for _, set := range Components(dark) {
		if reachesEdge(set, src.Width, src.Height) {
			for _, s := range set {
				clear(inside.Row(s.Y)[s.X0:s.X1])
			}
		}
	}
	part := NewMask(src.Width, src.Height)
	var largest []Span
	for _, set := range Components(inside) {
		if SpanArea(set) > SpanArea(largest) {
			largest = set
		}
	}
	part.FillSpans(largest)
	return part
}

// litLevel is the median of the pixels brighter than the mean; 0 where there is none.
func litLevel(src *Plane) float32 {
	sum := 0.
	for _, v := range src.Pix {
		sum += float64(v)
	}
	mean := float32(sum / float64(len(src.Pix)))
	var bright []float32
	for _, v := range src.Pix {
		if v > mean {
			bright = append(bright, v)
		}
	}
	if len(bright) == 0 {
		return src.Pix[0] // so that all is dark
	}
	slices.Sort(bright)
	return bright[len(bright)/2]
}

func reachesEdge(set []Span, width, height int) bool {
	for _, s := range set {
		if s.Y == 0 || s.Y == height-1 || s.X0 == 0 || s.X1 == width {
			return true
		}
	}
	return false
}

// boxMean is the mean over the square of ±radius px, as far as it lies in the frame.
func boxMean(src *Plane, radius int) *Plane {
	rows, out := NewPlane(src.Width, src.Height), NewPlane(src.Width, src.Height)
	for y := range src.Height {
		row := src.Row(y)
		for x := range row {
			a, b := max(x-radius, 0), min(x+radius+1, src.Width)
			sum := float32(0)
			for _, v := range row[a:b] {
				sum += v
			}
			rows.Set(x, y, sum/float32(b-a))
		}
	}
	for y := range src.Height {
		a, b := max(y-radius, 0), min(y+radius+1, src.Height)
		dst := out.Row(y)
		for v := a; v < b; v++ {
			for x, value := range rows.Row(v) {
				dst[x] += value / float32(b-a)
			}
		}
	}
	return out
}
