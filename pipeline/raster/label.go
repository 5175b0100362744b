package raster

// Blob is a connected set of pixels above a low threshold that reaches a high one.
type Blob struct {
	Spans []Span  // row by row from the top, left to right
	Peak  float32 // highest value
	PeakX int     // where that is; the first such pixel
	PeakY int
}

// Label returns the 8-connected sets of pixels with values >= low that hold at least
// one >= high (hysteresis thresholding, after Canny 1986), in the order of their first
// pixel, row by row from the top. low must be above 0, so that pixels written as 0 are out.
func Label(src *Plane, low, high float32) []Blob {
	if !(low > 0) || !(high >= low) {
		panic("raster: thresholds must be 0 < low <= high")
	}
	var runs []Span
	for y := range src.Height {
		runs = appendRunsAbove(runs, src.Row(y), y, low)
	}
	labels, n := LabelRuns(runs)
	blobs := make([]Blob, n)
	for i, r := range runs {
		b := &blobs[labels[i]]
		b.Spans = append(b.Spans, r)
		row := src.Row(r.Y)
		for x := r.X0; x < r.X1; x++ {
			if row[x] > b.Peak {
				b.Peak, b.PeakX, b.PeakY = row[x], x, r.Y
			}
		}
	}
	kept := blobs[:0]
	for _, b := range blobs {
		if b.Peak >= high {
			kept = append(kept, b)
		}
	}
	return kept
}

func appendRunsAbove(runs []Span, row []float32, y int, low float32) []Span {
	for x := 0; x < len(row); x++ {
		if row[x] < low {
			continue
		}
		x0 := x
		for x < len(row) && row[x] >= low {
			x++
		}
		runs = append(runs, Span{Y: y, X0: x0, X1: x})
	}
	return runs
}

// Components returns the 8-connected sets of pixels of a mask, in the order of their
// first pixel.
func Components(m *Mask) [][]Span {
	runs := m.Spans()
	labels, n := LabelRuns(runs)
	out := make([][]Span, n)
	for i, r := range runs {
		out[labels[i]] = append(out[labels[i]], r)
	}
	return out
}

// LabelRuns gives every run the number, from 0, of its 8-connected set and returns how
// many sets there are. Runs must stand row by row from the top, left to right. Sets are
// numbered by their first run. The method is union–find over the runs of
// neighbouring rows (He, Chao and Suzuki 2008) with path halving.
func LabelRuns(runs []Span) (labels []int32, n int) {
	parent := make([]int32, len(runs))
	above := 0 // first run of the row above that may still touch
	for i, r := range runs {
		parent[i] = int32(i)
		for runs[above].Y < r.Y-1 || runs[above].Y == r.Y-1 && runs[above].X1 < r.X0 {
			above++
		}
		for j := above; runs[j].Y == r.Y-1 && runs[j].X0 <= r.X1; j++ {
			join(parent, int32(i), int32(j))
		}
	}
	labels = make([]int32, len(runs))
	for i := range runs {
		root := find(parent, int32(i))
		if root == int32(i) {
			labels[i] = int32(n)
			n++
		} else {
			labels[i] = labels[root]
		}
	}
	return labels, n
}

func find(parent []int32, i int32) int32 {
	for parent[i] != i {
		parent[i] = parent[parent[i]]
		i = parent[i]
	}
	return i
}

// join makes the smaller root the parent, so a root is the first run of its set.
func join(parent []int32, a, b int32) {
	a, b = find(parent, a), find(parent, b)
	parent[max(a, b)] = min(a, b)
}
