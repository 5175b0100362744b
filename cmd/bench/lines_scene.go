package main

import (
	"math"
	"math/rand/v2"
	"time"

	"lapgate/pipeline/raster"
)

// A scratch of the study from end to end, px.
type scratch struct{ x0, y0, x1, y1 float64 }

func studyRandom(seed uint64) *rand.Rand { return rand.New(rand.NewPCG(seed, 1612)) }

// whiteNoise fills a plane with noise of sigma 1.
func whiteNoise(p *raster.Plane, seed uint64) *raster.Plane {
	random := studyRandom(seed)
	for i := range p.Pix {
		p.Pix[i] = float32(random.NormFloat64())
	}
	return p
}

// randomScratch places a scratch of some length at any angle and place, between pixels,
// anywhere in a picture.
func randomScratch(random *rand.Rand, width, height int, length float64) scratch {
	for {
		sin, cos := math.Sincos(2 * math.Pi * random.Float64())
		s := scratch{x0: float64(width) * random.Float64(), y0: float64(height) * random.Float64()}
		s.x1, s.y1 = s.x0+length*cos, s.y0+length*sin
		if s.x1 >= 0 && s.y1 >= 0 && s.x1 < float64(width-1) && s.y1 < float64(height-1) {
			return s
		}
	}
}

// drawScratch adds a straight band of some width and height, each pixel by the share of it
// that the band covers, told on 8 × 8 places.
func drawScratch(p *raster.Plane, s scratch, width, height float64) {
	length := math.Hypot(s.x1-s.x0, s.y1-s.y0)
	dx, dy := (s.x1-s.x0)/length, (s.y1-s.y0)/length
	reach := width/2 + 1
	for y := max(int(min(s.y0, s.y1)-reach), 0); y <= min(int(max(s.y0, s.y1)+reach), p.Height-1); y++ {
		for x := max(int(min(s.x0, s.x1)-reach), 0); x <= min(int(max(s.x0, s.x1)+reach), p.Width-1); x++ {
			if u, v := float64(x)-s.x0, float64(y)-s.y0; math.Abs(v*dx-u*dy) < reach {
				p.Pix[y*p.Stride+x] += float32(height * coveredShare(u, v, dx, dy, length, width))
			}
		}
	}
}

// coveredShare is for the pixel at (u, v) from the band's start.
func coveredShare(u, v, dx, dy, length, width float64) float64 {
	const n = 8
	in := 0
	for k := range n * n {
		x, y := u+(float64(k%n)+0.5)/n-0.5, v+(float64(k/n)+0.5)/n-0.5
		if along := x*dx + y*dy; along >= 0 && along <= length && math.Abs(y*dx-x*dy) <= width/2 {
			in++
		}
	}
	return float64(in) / (n * n)
}

// lay is a texture of lines: tones of a normal spread of 15 % about one spatial frequency,
// as the renderer draws it, straight or about a centre.
type lay struct {
	profile        []float32 // every quarter pixel from −reach on
	reach          float64
	concentric     bool
	cx, cy, nx, ny float64
}

const layTones, layStep = 16, 0.25

// newLay has the given root mean square, and the period in px.
func newLay(random *rand.Rand, width, height int, concentric bool, rms, period float64) lay {
	l := lay{reach: math.Hypot(float64(width), float64(height)), concentric: concentric,
		cx: float64(width) * (0.4 + 0.2*random.Float64()), cy: float64(height) * (0.4 + 0.2*random.Float64())}
	l.ny, l.nx = math.Sincos(math.Pi * random.Float64())
	l.profile = make([]float32, int(2*l.reach/layStep)+2)
	for range layTones {
		turn, phase := 2*math.Pi*math.Abs(1+0.15*random.NormFloat64())/period*layStep, 2*math.Pi*random.Float64()
		for i := range l.profile {
			l.profile[i] += float32(rms * math.Sqrt(2./layTones) * math.Sin(phase+turn*float64(i)))
		}
	}
	return l
}

// addTo adds the lay to noise of sigma 1 and divides by the sigma of a pixel that comes of
// it, as the level and noise of a surface with lay are measured.
func (l lay) addTo(p *raster.Plane, rms float64) {
	sigma := float32(math.Sqrt(1 + rms*rms))
	for y := range p.Height {
		row := p.Row(y)
		for x := range row {
			dx, dy := float64(x)-l.cx, float64(y)-l.cy
			d := dx*l.nx + dy*l.ny
			if l.concentric {
				d = math.Sqrt(dx*dx + dy*dy)
			}
			row[x] = (row[x] + l.profile[int((d+l.reach)/layStep)]) / sigma
		}
	}
}

func milliseconds(d time.Duration) float64 { return float64(d.Microseconds()) / 1000 }
