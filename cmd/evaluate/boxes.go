package main

import (
	"path/filepath"
	"strconv"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// quad is a box of the truth, by its four corners in order.
type quad [4]pipeline.Point

// contains reports whether the centre of a pixel lies in the convex quad.
func (q quad) contains(x, y float64) bool {
	left, right := false, false
	for i := range q {
		a, b := q[i], q[(i+1)%4]
		side := (b.X-a.X)*(y-a.Y) - (b.Y-a.Y)*(x-a.X)
		left, right = left || side < 0, right || side > 0
	}
	return !left || !right
}

// touches reports whether a pixel of the spans lies in the quad.
func (q quad) touches(spans []raster.Span) bool {
	for _, s := range spans {
		for x := s.X0; x < s.X1; x++ {
			if q.contains(float64(x), float64(s.Y)) {
				return true
			}
		}
	}
	return false
}

// truthBox is a box with its class.
type truthBox struct {
	quad
	class string
}

// readBoxes returns the boxes of boxes.csv by picture, without the extension.
func readBoxes(dir string) (map[string][]truthBox, error) {
	rows, err := readCSV(filepath.Join(dir, "boxes.csv"), 10)
	if err != nil {
		return nil, err
	}
	out := map[string][]truthBox{}
	for _, row := range rows {
		b := truthBox{class: row[1]}
		for i := range b.quad {
			if b.quad[i].X, err = strconv.ParseFloat(row[2+2*i], 64); err != nil {
				return nil, err
			}
			if b.quad[i].Y, err = strconv.ParseFloat(row[3+2*i], 64); err != nil {
				return nil, err
			}
		}
		out[row[0]] = append(out[row[0]], b)
	}
	return out, nil
}

// boxScore is what was found of boxes.
type boxScore struct{ found, missed, falses int }

func (s boxScore) plus(t boxScore) boxScore {
	return boxScore{s.found + t.found, s.missed + t.missed, s.falses + t.falses}
}

// f1 is 2·found / (2·found + false + missed).
func (s boxScore) f1() float64 {
	return 2 * float64(s.found) / float64(max(2*s.found+s.falses+s.missed, 1))
}

// scoreBoxes gives one credit for each box that any defect touches; a defect that
// touches none is false. Each defect is given as its pixels.
func scoreBoxes(truth []truthBox, defects [][]raster.Span) boxScore {
	var s boxScore
	hit := make([]bool, len(defects))
	for _, b := range truth {
		found := false
		for i, d := range defects {
			if b.touches(d) {
				found, hit[i] = true, true
			}
		}
		if found {
			s.found++
		} else {
			s.missed++
		}
	}
	for _, h := range hit {
		if !h {
			s.falses++
		}
	}
	return s
}
