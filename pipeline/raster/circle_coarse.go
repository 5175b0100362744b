package raster

import (
	"math"
	"slices"
)

// coarseSide is about how many blocks the longer side of the reduced picture has.
const coarseSide = 200

// votingShare is the share of the steepest blocks that vote.
const votingShare = 0.06

// coarseCircle finds centre and radius to about a block.
func coarseCircle(src *Plane, s CircleSearch) (Circle, bool) {
	step := max(1, max(src.Width, src.Height)/coarseSide)
	small := reduce(src, step)
	if small.Width < 5 || small.Height < 5 {
		return Circle{}, false
	}
	votes := steepest(small, s.DarkInside)
	if len(votes) == 0 {
		return Circle{}, false
	}
	k, shift := float64(step), float64(step-1)/2
	reduced := CircleSearch{X: (s.X - shift) / k, Y: (s.Y - shift) / k, Reach: s.Reach/k + 1, RMin: s.RMin/k - 1, RMax: s.RMax/k + 1}
	x, y, ok := voteCentre(votes, small.Width, small.Height, reduced)
	if !ok {
		return Circle{}, false
	}
	r := voteRadius(votes, x, y, reduced)
	return Circle{X: x*k + shift, Y: y*k + shift, R: r * k}, true
}

// reduce returns the means of step × step blocks; what does not fill one is left out.
func reduce(src *Plane, step int) *Plane {
	out := NewPlane(max(src.Width/step, 1), max(src.Height/step, 1))
	for y := range out.Height {
		row := out.Row(y)
		for v := y * step; v < min((y+1)*step, src.Height); v++ {
			in := src.Row(v)
			for x := range row {
				for _, p := range in[x*step : min((x+1)*step, src.Width)] {
					row[x] += p
				}
			}
		}
		for x := range row {
			row[x] /= float32(step * step)
		}
	}
	return out
}

// vote is a place with a steep gradient and the unit vector that leads into the part.
type vote struct{ x, y, ux, uy, weight float64 }

// steepest returns the steepest places of p (3 × 3 Sobel gradient).
func steepest(p *Plane, darkInside bool) []vote {
	var all []vote
	for y := 1; y < p.Height-1; y++ {
		a, b, c := p.Row(y-1), p.Row(y), p.Row(y+1)
		for x := 1; x < p.Width-1; x++ {
			gx := float64(a[x+1] - a[x-1] + 2*(b[x+1]-b[x-1]) + c[x+1] - c[x-1])
			gy := float64(c[x-1] - a[x-1] + 2*(c[x]-a[x]) + c[x+1] - a[x+1])
			if g := math.Hypot(gx, gy); g > 0 {
				if darkInside {
					gx, gy = -gx, -gy
				}
				all = append(all, vote{float64(x), float64(y), gx / g, gy / g, g})
			}
		}
	}
	slices.SortFunc(all, func(a, b vote) int {
		switch {
		case a.weight > b.weight:
			return -1
		case a.weight < b.weight:
			return 1
		}
		return 0
	})
	return all[:int(votingShare*float64(len(all)))]
}

// voteCentre lets every place vote along its gradient for the centres it may belong to
// and returns the centre of gravity of the highest 3 × 3 sum.
func voteCentre(votes []vote, width, height int, s CircleSearch) (x, y float64, ok bool) {
	board := NewPlane(width, height)
	for _, v := range votes {
		for r := math.Floor(s.RMin); r <= s.RMax; r++ {
			cx, cy := int(math.Round(v.x+r*v.ux)), int(math.Round(v.y+r*v.uy))
			if cx >= 0 && cy >= 0 && cx < width && cy < height {
				board.Pix[cy*width+cx]++
			}
		}
	}
	best := float32(0)
	for cy := 2; cy < height-2; cy++ {
		for cx := 2; cx < width-2; cx++ {
			if math.Hypot(float64(cx)-s.X, float64(cy)-s.Y) > s.Reach {
				continue
			}
			if sum, gx, gy := gravity(board, cx, cy); sum > best {
				best, x, y = sum, gx, gy
			}
		}
	}
	return x, y, best > 0
}

// gravity returns sum and centre of gravity of the 5 × 5 around (cx, cy).
func gravity(p *Plane, cx, cy int) (sum float32, x, y float64) {
	var sx, sy float32
	for dy := -2; dy <= 2; dy++ {
		for dx := -2; dx <= 2; dx++ {
			v := p.At(cx+dx, cy+dy)
			sum += v
			sx += v * float32(dx)
			sy += v * float32(dy)
		}
	}
	if sum == 0 {
		return 0, float64(cx), float64(cy)
	}
	return sum, float64(cx) + float64(sx/sum), float64(cy) + float64(sy/sum)
}

// voteRadius returns the distance from (x, y) at which most places point to it; weighted
// by 1/r, since a longer edge has more places.
func voteRadius(votes []vote, x, y float64, s CircleSearch) float64 {
	const perBlock = 2
	low := max(s.RMin, 1)
	count := make([]float64, int((s.RMax-low)*perBlock)+3)
	for _, v := range votes {
		dx, dy := x-v.x, y-v.y
		r := math.Hypot(dx, dy)
		k := int((r - low) * perBlock)
		if r < low || k >= len(count) || dx*v.ux+dy*v.uy < 0.95*r {
			continue
		}
		count[k] += 1 / r
	}
	best, at := -1., 0
	for k := range count {
		sum := count[k]
		if k > 0 {
			sum += count[k-1]
		}
		if k+1 < len(count) {
			sum += count[k+1]
		}
		if sum > best {
			best, at = sum, k
		}
	}
	return low + (float64(at)+0.5)/perBlock
}
