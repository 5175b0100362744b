package lines

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"lapgate/pipeline/raster"
)

func find(t *testing.T, p *raster.Plane, change func(*Settings)) []Line {
	t.Helper()
	return findIn(t, p, Whole(p.Width, p.Height), change)
}

func findIn(t *testing.T, p *raster.Plane, region raster.Rows, change func(*Settings)) []Line {
	t.Helper()
	s := Default
	if change != nil {
		change(&s)
	}
	var f Finder
	r, err := f.Find(p, region, nil, s)
	if err != nil {
		t.Fatal(err)
	}
	return r.Lines
}

// Scratches 1 px wide and 300 px long, as high as the noise of one pixel, at any angle.
// Each is found, in full and in half resolution, in at least 95 of 100 cases.
func TestFaintScratches(t *testing.T) {
	for _, half := range []bool{false, true} {
		r := rand.New(rand.NewPCG(4, 4))
		found, trials := 0, 40
		for i := range trials {
			p := noise(480, 480, uint64(100+i))
			g := random(r, 480, 480, 300)
			draw(p, g.x0, g.y0, g.x1, g.y1, 1, 1)
			for _, l := range find(t, p, func(s *Settings) { s.Half = half }) {
				if g.matches(l) {
					found++
					break
				}
			}
		}
		if found < 38 {
			t.Errorf("half %v: %d of %d found", half, found, trials)
		}
	}
}

// Some five frames of 12 megapixels in a hundred have a line in noise alone (the bench
// counts); these pictures of one frame together have none.
func TestNothingInNoise(t *testing.T) {
	for i := range 12 {
		if l := find(t, noise(1000, 1000, uint64(300+i)), nil); len(l) > 0 {
			t.Errorf("noise %d: %+v", i, l)
		}
	}
}

// At twice the noise ends, angle, length and width are those that were drawn.
func TestMeasures(t *testing.T) {
	for _, half := range []bool{false, true} {
		r := rand.New(rand.NewPCG(5, 5))
		for i := range 12 {
			p := noise(480, 480, uint64(200+i))
			g := random(r, 480, 480, 250)
			draw(p, g.x0, g.y0, g.x1, g.y1, 1.5, 2)
			lines := find(t, p, func(s *Settings) { s.Half = half })
			if len(lines) != 1 {
				t.Errorf("%d: %d lines, want 1: %+v", i, len(lines), lines)
				continue
			}
			l, angle := lines[0], math.Atan2(g.y1-g.y0, g.x1-g.x0)*180/math.Pi
			if off := math.Abs(math.Remainder(l.Angle-angle, 180)); g.apart(l) > 3 || off > 0.3 || math.Abs(l.Length-250) > 5 {
				t.Errorf("half %v, %d: ends %.1f px off, angle %.2f°, length %.1f", half, i, g.apart(l), off, l.Length)
			}
			if l.Dark || math.Abs(l.Width-1.5) > 0.4 || math.Abs(l.Contrast-2) > 0.4 || math.Abs(l.Flux-250*1.5*2) > 100 {
				t.Errorf("half %v, %d: width %.2f, contrast %.2f, flux %.0f", half, i, l.Width, l.Contrast, l.Flux)
			}
		}
	}
}

// Wide scratches are one line each, as wide as they were drawn to a fifth; a soft ridge of
// the level, 14 px wide, is none.
func TestWideScratch(t *testing.T) {
	for _, width := range []float64{3, 5, 8} {
		p := noise(480, 480, uint64(500+width))
		draw(p, 60, 90, 420, 300, width, 1.2)
		lines := find(t, p, nil)
		if len(lines) != 1 || math.Abs(lines[0].Width/width-1) > 0.2 || math.Abs(lines[0].Length-417) > 8 {
			t.Errorf("width %g: %s, %+v", width, lengths(lines), lines)
		}
	}
	p := noise(480, 480, 510)
	for i := range p.Pix {
		d := (float64(i%480) - 2*float64(i/480) + 200) / math.Sqrt(5)
		p.Pix[i] += float32(0.7 * math.Exp(-d*d/(2*6*6)))
	}
	if lines := find(t, p, nil); len(lines) > 0 {
		t.Errorf("a ridge: %+v", lines)
	}
}

func TestPolarity(t *testing.T) {
	p := noise(400, 400, 31)
	draw(p, 50, 60, 350, 100, 1, -1.5)
	draw(p, 60, 340, 330, 250, 1, 1.5)
	for polarity, want := range map[Polarity]int{Bright: 1, Dark: 1, Both: 2} {
		lines := find(t, p, func(s *Settings) { s.Polarity = polarity })
		if len(lines) != want || want == 1 && lines[0].Dark != (polarity == Dark) {
			t.Errorf("polarity %d: %+v", polarity, lines)
		}
	}
}

// Pieces with gaps of 25 px are one line; with a gap of 120 px they are two.
func TestBrokenPiecesAreJoined(t *testing.T) {
	p := noise(700, 300, 32)
	for _, x := range []float64{30, 155, 280, 500} {
		draw(p, x, 100+x/5, x+100, 120+x/5, 1, 2)
	}
	lines := find(t, p, nil)
	if len(lines) != 2 || math.Abs(lines[0].Length-357) > 8 || math.Abs(lines[1].Length-102) > 8 {
		t.Errorf("got %s", lengths(lines))
	}
}

// drawArc adds an arc of a circle, piece by piece.
func drawArc(p *raster.Plane, cx, cy, radius, from, length, height float64) {
	n := int(length / 4)
	at := func(k int) (x, y float64) {
		sin, cos := math.Sincos(from + float64(k)*length/float64(n)/radius)
		return cx + radius*cos, cy + radius*sin
	}
	for k := range n {
		x0, y0 := at(k)
		x1, y1 := at(k + 1)
		draw(p, x0, y0, x1, y1, 1, height)
	}
}

// lengths says in brief what was found.
func lengths(lines []Line) string {
	out := fmt.Sprintf("%d lines", len(lines))
	for _, l := range lines {
		out += fmt.Sprintf(", %.0f px at %.1f sigmas", l.Length, l.Sigmas)
	}
	return out
}

// Where a curved line ends is known to less than a stride.
func TestCurvedScratchIsOneLine(t *testing.T) {
	for _, radius := range []float64{300, 600, 1000, 2000} {
		for i, from := range []float64{0.2, 1, 2.5} {
			p := noise(700, 700, uint64(40+i))
			drawArc(p, 350-radius*math.Cos(from+200/radius), 350-radius*math.Sin(from+200/radius), radius, from, 400, 2)
			lines := find(t, p, nil)
			if len(lines) != 1 || math.Abs(lines[0].Length-400) > 18 {
				t.Errorf("radius %g, %d: %s", radius, i, lengths(lines))
				continue
			}
			cx, cy := 350-radius*math.Cos(from+200/radius), 350-radius*math.Sin(from+200/radius)
			for _, q := range lines[0].Path {
				if off := math.Abs(math.Hypot(q.X-cx, q.Y-cy) - radius); off > 3 {
					t.Errorf("radius %g: the path is %.1f px beside the arc", radius, off)
				}
			}
		}
	}
}

// Three to eight digs in a row, and two large ones, are no scratch.
func TestChainOfDigsIsNoLine(t *testing.T) {
	for n := 2; n <= 8; n++ {
		for i := range 3 {
			p := noise(500, 500, uint64(60+10*n+i))
			radius := 2 + float64(i)
			if n == 2 {
				radius = 12
			}
			for k := range n {
				x, y := 60+380*float64(k)/float64(n-1), 80+300*float64(k)/float64(n-1)
				addDisc(p, x, y, radius, 30)
			}
			if l := find(t, p, nil); len(l) > 0 {
				t.Errorf("%d digs of radius %g: %+v", n, radius, l)
			}
		}
	}
}

func addDisc(p *raster.Plane, cx, cy, radius, height float64) {
	for y := int(cy - radius - 2); y <= int(cy+radius+2); y++ {
		for x := int(cx - radius - 2); x <= int(cx+radius+2); x++ {
			d := math.Hypot(float64(x)-cx, float64(y)-cy)
			p.Pix[y*p.Stride+x] += float32(height * min(max(radius+0.5-d, 0), 1))
		}
	}
}

// A scratch goes on being one where it crosses a dig and another scratch.
func TestCrossing(t *testing.T) {
	p := noise(500, 500, 90)
	draw(p, 40, 60, 460, 420, 1, 1.5)
	draw(p, 60, 430, 450, 70, 1, 6)
	addDisc(p, 150, 154, 8, 40)
	lines := find(t, p, nil)
	if len(lines) != 2 || math.Abs(lines[0].Length-531) > 8 || math.Abs(lines[1].Length-553) > 24 {
		t.Errorf("got %s: %+v", lengths(lines), lines)
	}
}

func disc(width, height int, cx, cy, radius float64) raster.Rows {
	var spans []raster.Span
	for y := range height {
		if half := radius*radius - (float64(y)-cy)*(float64(y)-cy); half > 0 {
			spans = append(spans, raster.Span{Y: y, X0: int(cx-math.Sqrt(half)) + 1, X1: int(cx+math.Sqrt(half)) + 1})
		}
	}
	return raster.NewRows(spans, width, height)
}

// Light that leaks in over the border of a round region is no scratch; a scratch that
// comes from the border inwards is one, and what lies outside is nothing.
func TestRim(t *testing.T) {
	const side, radius = 900, 420
	p := noise(side, side, 91)
	for i := range p.Pix {
		if d := radius - math.Hypot(float64(i%side)-450, float64(i/side)-450); d > 0 && d < 3 {
			p.Pix[i] += float32(6 - 2*d)
		} else if d < 0 {
			p.Pix[i] = 50
		}
	}
	region := disc(side, side, 450, 450, radius)
	if l := findIn(t, p, region, nil); len(l) > 0 {
		t.Errorf("the rim: %+v", l)
	}
	draw(p, 450, 30, 600, 300, 1, 1.5)
	if l := findIn(t, p, region, nil); len(l) != 1 || math.Abs(l[0].Length-309) > 8 {
		t.Errorf("from the rim inwards: %+v", l)
	}
}

// Lay as strong as the noise, straight and concentric, is not reported, and a scratch
// across it is.
func TestLay(t *testing.T) {
	for _, period := range []float64{5, 8, 14} {
		for _, rms := range []float64{0.5, 1, 2} {
			for _, centre := range []*raster.Point{nil, {X: 330, Y: 420}} {
				p := layNoise(900, 700, uint64(period*10), rms, period, 0.4, centre)
				know := func(s *Settings) { s.Centre = centre }
				if l := find(t, p, know); len(l) > 0 {
					t.Errorf("period %g, rms %g, centre %v: %d lines, first %+v", period, rms, centre, len(l), l[0])
				}
				x, y := 560., 420. // outwards from the centre, or across straight lay
				draw(p, x, y, x+300*math.Cos(math.Pi/2+0.4), y-300*math.Sin(math.Pi/2+0.4), 1, 1.5)
			}
		}
	}
}

func TestScratchOnLay(t *testing.T) {
	for _, centre := range []*raster.Point{nil, {X: 100, Y: 350}} {
		p := layNoise(900, 700, 7, 1, 8, 0.4, centre)
		g := segment{400, 340, 700, 330} // outwards from the centre
		if centre == nil {
			g = segment{400, 200, 400 - 300*math.Sin(0.4), 200 + 300*math.Cos(0.4)}
		}
		draw(p, g.x0, g.y0, g.x1, g.y1, 1, 1)
		lines := find(t, p, func(s *Settings) { s.Centre = centre })
		if len(lines) != 1 || !g.matches(lines[0]) {
			t.Errorf("centre %v: got %+v", centre, lines)
		}
	}
}

// What lay there is, is said: straight to a degree or two and in its period to a third,
// which a spread of 15 % among 16 tones allows.
func TestLayIsMeasured(t *testing.T) {
	var f Finder
	for _, period := range []float64{5, 9, 16} {
		for _, centre := range []*raster.Point{nil, {X: 430, Y: 350}} {
			s := Default
			s.Centre = centre
			r, err := f.Find(layNoise(900, 700, uint64(period), 1, period, 0.7, centre), Whole(900, 700), nil, s)
			if err != nil {
				t.Fatal(err)
			}
			want := Straight
			if centre != nil {
				want = Concentric
			}
			l := r.Lay
			if l.Kind != want || math.Abs(l.Period/period-1) > 0.35 || l.Contrast < 0.3 || l.Contrast > 1.3 || want == Straight && math.Abs(l.Angle-0.7*180/math.Pi) > 2 {
				t.Errorf("period %g, centre %v: got %+v", period, centre, l)
			}
		}
	}
	for _, centre := range []*raster.Point{nil, {X: 430, Y: 350}} {
		s := Default
		s.Centre = centre
		if r, err := f.Find(noise(900, 700, 3), Whole(900, 700), nil, s); err != nil || r.Lay != (Lay{}) {
			t.Errorf("noise: lay %+v, error %v", r.Lay, err)
		}
	}
}

func TestOddPictures(t *testing.T) {
	nan := raster.NewPlane(200, 150)
	for i := range nan.Pix {
		nan.Pix[i] = float32(math.NaN())
	}
	flat := raster.NewPlane(300, 300)
	for i := range flat.Pix {
		flat.Pix[i] = float32(math.Inf(1))
	}
	for name, p := range map[string]*raster.Plane{"one pixel": raster.NewPlane(1, 1), "a row": raster.NewPlane(500, 1),
		"a column": raster.NewPlane(1, 500), "small": noise(40, 30, 1), "zeros": raster.NewPlane(300, 200), "no numbers": nan} {
		if l := find(t, p, func(s *Settings) { s.Polarity = Both }); len(l) > 0 {
			t.Errorf("%s: %+v", name, l)
		}
	}
	find(t, flat, nil)
	if l := findIn(t, noise(300, 300, 2), raster.NewRows(nil, 300, 300), nil); len(l) > 0 {
		t.Errorf("no region: %+v", l)
	}
}

func TestRefusals(t *testing.T) {
	var f Finder
	for name, change := range map[string]func(*Settings){
		"polarity": func(s *Settings) { s.Polarity = 2 }, "seed": func(s *Settings) { s.Seed = math.NaN() },
		"threshold": func(s *Settings) { s.Threshold = 1 }, "min_length": func(s *Settings) { s.MinLength = 3 },
		"join_gap": func(s *Settings) { s.JoinGap = -1 }, "rim": func(s *Settings) { s.Rim = math.NaN() }, "max_lines": func(s *Settings) { s.MaxLines = 0 },
	} {
		s := Default
		change(&s)
		if _, err := f.Find(noise(50, 50, 1), Whole(50, 50), nil, s); err == nil {
			t.Errorf("%s was taken", name)
		}
	}
	if _, err := f.Find(noise(50, 50, 1), Whole(50, 50), raster.NewMask(40, 50), Default); err == nil {
		t.Error("bad pixels of another picture were taken")
	}
}

// The same lines come out again, also from memory that another picture used.
func TestSameAgain(t *testing.T) {
	var f Finder
	p, q := noise(600, 500, 70), noise(600, 500, 71)
	draw(p, 100, 100, 400, 300, 1, 1.5)
	draw(q, 100, 300, 400, 100, 1, 3)
	first, err := f.Find(p, Whole(600, 500), nil, Default)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := f.Find(q, Whole(600, 500), nil, Default); err != nil {
		t.Fatal(err)
	}
	again, err := f.Find(p, Whole(600, 500), nil, Default)
	if err != nil || len(first.Lines) != 1 || len(again.Lines) != 1 || first.Lines[0].Sigmas != again.Lines[0].Sigmas || first.Lines[0].Length != again.Lines[0].Length {
		t.Errorf("first %+v, again %+v, error %v", first.Lines, again.Lines, err)
	}
}
