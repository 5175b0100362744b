package calibrate

import (
	"math"
	"runtime"
	"slices"
	"sync"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate/emva"
	"lapgate/pipeline/raster"
)

// BadCounts says how many pixels were found bad, and why; a pixel counts once for each
// reason.
type BadCounts struct {
	Hot       int `json:"hot"`       // dark level far above the neighbourhood
	Noisy     int `json:"noisy"`     // temporal noise in the dark far above the typical
	Deviating int `json:"deviating"` // response far from the neighbourhood
	Dead      int `json:"dead"`      // hardly any response
	Saturated int `json:"saturated"` // at full scale in any frame
}

// madToSigma turns a median absolute deviation of normal values into their sigma.
const madToSigma = 1.4826

// medianRadius is that of the square neighbourhood a pixel is compared with: 5 × 5.
const medianRadius = 2

// badSet collects bad pixels and the reasons.
type badSet struct {
	mask   *raster.Mask
	counts BadCounts
}

func (b *badSet) mark(i int, reason *int) {
	b.mask.Bits[i] = true
	*reason++
}

func (b *badSet) saturated(pixels []bool) {
	for i, s := range pixels {
		if s {
			b.mark(i, &b.counts.Saturated)
		}
	}
}

// hot marks dark pixels above their local median by HotSigma robust sigmas. The sigma
// is at least the noise of the mean itself, for most pixels of a quiet dark agree.
// deviation is the dark plane less its local median.
func (b *badSet) hot(deviation *raster.Plane, noiseOfMean float64, r Rules) {
	limit := r.HotSigma * max(robustSigma(deviation.Pix), noiseOfMean)
	for i, v := range deviation.Pix {
		if float64(v) > limit {
			b.mark(i, &b.counts.Hot)
		}
	}
}

// noisy marks pixels whose sample variance over the dark frames is NoisySigma² times
// the typical one.
func (b *badSet) noisy(s *stack, typical float64) {
	n := uint64(len(s.files))
	if int(n) < s.scene.rules.NoisyFrames {
		return
	}
	limit := s.scene.rules.NoisySigma * s.scene.rules.NoisySigma * max(typical, emva.MinDarkVariance)
	for i, q := range s.squares {
		sum := uint64(s.sum[i])
		variance := float64(n*q-sum*sum) / float64(n*(n-1))
		if variance > limit {
			b.mark(i, &b.counts.Noisy)
		}
	}
}

// response marks pixels off their local median, and those that hardly respond. norm is
// the median response in DN.
func (b *badSet) response(p, local *raster.Plane, norm float64, r Rules) {
	relative := raster.NewPlane(p.Width, p.Height)
	for i, v := range p.Pix {
		relative.Pix[i] = v/max(local.Pix[i], float32(r.DeadShare*norm)) - 1
	}
	limit := max(r.DeviatingSigma*robustSigma(relative.Pix), r.DeviatingShare)
	for i, v := range p.Pix {
		if float64(v) < r.DeadShare*norm {
			b.mark(i, &b.counts.Dead)
		} else if math.Abs(float64(relative.Pix[i])) > limit {
			b.mark(i, &b.counts.Deviating)
		}
	}
}

func (b *badSet) list() []pipeline.PixelAt {
	var out []pipeline.PixelAt
	for i, bad := range b.mask.Bits {
		if bad {
			out = append(out, pipeline.PixelAt{X: i % b.mask.Width, Y: i / b.mask.Width})
		}
	}
	return out
}

func minus(a, b *raster.Plane) *raster.Plane {
	out := raster.NewPlane(a.Width, a.Height)
	for i, v := range a.Pix {
		out.Pix[i] = v - b.Pix[i]
	}
	return out
}

// robustSigma returns 1.4826 times the median absolute deviation.
func robustSigma(v []float32) float64 {
	s := slices.Clone(v)
	centre := middle(s)
	for i, x := range v {
		s[i] = float32(math.Abs(float64(x - centre)))
	}
	return madToSigma * float64(middle(s))
}

// localMedian returns the median of each pixel's 5 × 5 neighbourhood, which is smaller
// at the image border.
func localMedian(p *raster.Plane) *raster.Plane {
	out := raster.NewPlane(p.Width, p.Height)
	rows := make(chan int)
	var wg sync.WaitGroup
	for range runtime.GOMAXPROCS(0) {
		wg.Go(func() {
			for y := range rows {
				medianRow(out.Row(y), p, y)
			}
		})
	}
	for y := range p.Height {
		rows <- y
	}
	close(rows)
	wg.Wait()
	return out
}

func medianRow(dst []float32, p *raster.Plane, y int) {
	const side = 2*medianRadius + 1
	var near [side * side]float32
	y0, y1 := max(y-medianRadius, 0), min(y+medianRadius+1, p.Height)
	for x := range dst {
		x0, x1 := max(x-medianRadius, 0), min(x+medianRadius+1, p.Width)
		v := near[:0]
		for row := y0; row < y1; row++ {
			v = append(v, p.Row(row)[x0:x1]...)
		}
		dst[x] = middle(v)
	}
}
