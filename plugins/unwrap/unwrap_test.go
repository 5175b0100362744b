package unwrap

import (
	"context"
	"flag"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/files"
	"lapgate/plugins/stagetest"
)

func bore() pipeline.Annulus { return newAnnulus(Default, 399.5, 399.5) }

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: got %g, want %g ± %g", what, got, want, tolerance)
	}
}

// mark is something bright on the surface: true where it is, u and v in µm.
type mark func(u, v float64) bool

// frame draws marks on the bore as the camera sees them, each pixel of 3 × 3 points,
// blurred no further, on 20 DN with noise of 1 DN.
func frame(a pipeline.Annulus, side int, marks ...mark) *pipeline.Item {
	const sub = 3
	random := rand.New(rand.NewPCG(3, 4))
	counts := make([]uint16, side*side)
	for i := range counts {
		x, y, hit := float64(i%side), float64(i/side), 0
		if r := math.Hypot(x-a.CentreX, y-a.CentreY); r > a.InnerPx-2 && r < a.OuterPx+2 {
			for k := range sub * sub {
				u, v, _ := a.ToStation(x+(float64(k%sub)-1)/sub, y+(float64(k/sub)-1)/sub)
				for _, m := range marks {
					if m(u, v) {
						hit++
					}
				}
			}
		}
		counts[i] = uint16(math.Round(max(20+random.NormFloat64()+90*float64(hit)/(sub*sub), 0)))
	}
	return &pipeline.Item{View: "ring", Frames: []pipeline.Frame{{Raw: raster.Pack(raster.Mono8, counts, side, side)}}, Geometry: pipeline.Planar{UMPerPx: 40}}
}

func disc(u0, v0, diameter float64) mark {
	const turn = 2 * math.Pi * 10_000
	return func(u, v float64) bool {
		du := math.Remainder(u-u0, turn)
		return math.Hypot(du, v-v0) <= diameter/2
	}
}

func bar(u0, v0, length, width, angleDeg float64) mark {
	s, c := math.Sincos(angleDeg * math.Pi / 180)
	return func(u, v float64) bool {
		du, dv := u-u0, v-v0
		return math.Abs(du*c+dv*s) <= length/2 && math.Abs(-du*s+dv*c) <= width/2
	}
}

func run(t *testing.T, item *pipeline.Item) {
	t.Helper()
	stage, _, err := Factory().New(nil, pipeline.Environment{})
	if err != nil {
		t.Fatal(err)
	}
	if err := stage.Run(context.Background(), item); err != nil {
		t.Fatal(err)
	}
}

// A round dig has the same diameter in µm wherever it lies on the bore, although its
// pixels change from 9 to 20 along the arc; one on the seam is found once; the defect's
// pixel is where the camera shows it.
func TestDigsOnTheBore(t *testing.T) {
	a := bore()
	places := [][2]float64{{0, -4000}, {9000, 4200}, {-17000, 0}, {math.Pi * 10_000, 1000}} // µm; the last on the seam
	var marks []mark
	for _, p := range places {
		marks = append(marks, disc(p[0], p[1], 600))
	}
	item := frame(a, 800, marks...)
	run(t, item)
	if len(item.Defects) != len(places) {
		t.Fatalf("%d defects, want %d: %+v", len(item.Defects), len(places), item.Defects)
	}
	for _, p := range places {
		x, y := a.ToPixel(p[0], p[1])
		found := false
		for _, d := range item.Defects {
			if math.Hypot(d.XPx-x, d.YPx-y) > 2 {
				continue
			}
			found = true
			near(t, "diameter", d.DiameterUM, 600, 30)
			near(t, "u", math.Abs(d.UUM), math.Abs(p[0]), 40)
			near(t, "v", d.VUM, p[1], 40)
			near(t, "edge distance", d.EdgeDistanceUM, 5000-math.Abs(p[1]), 40)
			if d.Kind != pipeline.Dig || d.Zone != "ring" || float64(d.Box.X0) > x || float64(d.Box.X1) < x || float64(d.Box.Y0) > y || float64(d.Box.Y1) < y {
				t.Errorf("got %+v", d)
			}
		}
		if !found {
			t.Errorf("nothing found at (%.1f, %.1f) px: %+v", x, y, item.Defects)
		}
	}
	near(t, "area of the region", item.Region.Zones[0].AreaMM2, 2*math.Pi*100, 1e-9)
	near(t, "coverage", item.Coverage.Share, 1, 1e-9)
}

// On a cone that widens from 20 to 26 mm over 4 mm, seen as the bore is, a dig has the same
// diameter at both ends; a flat rim, of no height, is the cone's limit.
func TestDigsOnAConeAndARim(t *testing.T) {
	for _, height := range []float64{4, 0} {
		s := Default
		s.OuterDiameterMM, s.HeightMM = 26, height
		a := newAnnulus(s, 399.5, 399.5)
		for _, v0 := range []float64{-a.SlantUM / 3, a.SlantUM / 3} {
			u0 := 4000.0
			_, radius := a.At(a.InnerPx + (v0/a.SlantUM+0.5)*(a.OuterPx-a.InnerPx))
			item := frame(a, 800, func(u, v float64) bool { // arcs are compared at the dig's own height
				_, here := a.At(a.InnerPx + (v/a.SlantUM+0.5)*(a.OuterPx-a.InnerPx))
				return math.Hypot(u/here*radius-u0, v-v0) <= 250
			})
			stage, _, err := Factory().New(func(dst any) error { *dst.(*Settings) = s; return nil }, pipeline.Environment{})
			if err == nil {
				err = stage.Run(context.Background(), item)
			}
			if err != nil || len(item.Defects) != 1 {
				t.Fatalf("height %g, v %g: %v, %+v", height, v0, err, item.Defects)
			}
			d := item.Defects[0]
			near(t, "diameter", d.DiameterUM, 500, 25)
			near(t, "u", d.UUM, u0, 40)
			near(t, "v", d.VUM, v0, 40)
			if _, ring := item.Geometry.(pipeline.Annulus); !ring {
				t.Errorf("the geometry is %+v", item.Geometry)
			}
		}
	}
}

// Scratches keep length, width and direction along the arc, up the bore and across both.
func TestScratchesOnTheBore(t *testing.T) {
	a := bore()
	for _, c := range []struct{ u, v, angle float64 }{{2000, 0, 0}, {-8000, 500, 90}, {12000, -500, 45}} {
		item := frame(a, 800, bar(c.u, c.v, 6000, 300, c.angle))
		run(t, item)
		if len(item.Defects) != 1 || item.Defects[0].Kind != pipeline.Scratch {
			t.Fatalf("%+v: got %+v", c, item.Defects)
		}
		d := item.Defects[0]
		near(t, "length", d.LengthUM, 6000, 300)
		near(t, "width", d.WidthUM, 300, 60)
		// from the arc's direction at the defect, turned from the arc outwards
		want := math.Atan2(d.YPx-a.CentreY, d.XPx-a.CentreX)*180/math.Pi + 90 - c.angle
		off := math.Abs(math.Remainder(d.AngleDeg-want, 180))
		if c.angle != 0 && off > 6 || c.angle == 0 && off > 25 { // an arc in the picture bends
			t.Errorf("%+v: angle %.1f°, want %.1f°", c, d.AngleDeg, want)
		}
	}
}

var update = flag.Bool("update", false, "rewrite the demo frame")

// The demo frame is a small bore with a dig of 900 µm and a scratch of 5 mm.
func TestDemoFrame(t *testing.T) {
	const file = "../outside/demo/unwrap.png"
	s := Default
	s.InnerRadiusPx, s.OuterRadiusPx = 75, 175
	a := newAnnulus(s, 199.5, 199.5)
	if *update {
		if err := files.Write(file, frame(a, 400, disc(5000, 2000, 900), bar(-15000, 0, 5000, 400, 90)).Frames[0].Raw); err != nil {
			t.Fatal(err)
		}
	}
	raw, err := files.Read(file, files.Options{})
	if err != nil {
		t.Fatal(err)
	}
	stage, _, err := Factory().New(func(dst any) error { *dst.(*Settings) = s; return nil }, pipeline.Environment{})
	if err != nil {
		t.Fatal(err)
	}
	item := &pipeline.Item{View: "ring", Frames: []pipeline.Frame{{Raw: raw}}}
	if err := stage.Run(context.Background(), item); err != nil {
		t.Fatal(err)
	}
	if len(item.Defects) != 2 {
		t.Fatalf("got %+v", item.Defects)
	}
	for _, d := range item.Defects {
		if d.Kind == pipeline.Dig {
			near(t, "dig", d.DiameterUM, 900, 60)
		} else {
			near(t, "scratch", d.LengthUM, 5000, 300)
		}
	}
}

func TestConforms(t *testing.T) {
	f := Factory()
	f.New = func(decode pipeline.Decode, env pipeline.Environment) (pipeline.Stage, any, error) {
		return Factory().New(func(dst any) error {
			s := dst.(*Settings)
			s.InnerRadiusPx, s.OuterRadiusPx, s.GridPx = 30, 60, 16
			return nil
		}, env)
	}
	stagetest.Run(t, f, func(raw raster.Raw) *pipeline.Item {
		return &pipeline.Item{View: "ring", Frames: []pipeline.Frame{{Raw: raw}}, Geometry: pipeline.Planar{UMPerPx: 200}}
	})
}

func TestCheckNamesTheKey(t *testing.T) {
	for key, change := range map[string]func(*Settings){
		"inner_radius_px":   func(s *Settings) { s.InnerRadiusPx = math.NaN() },
		"outer_radius_px":   func(s *Settings) { s.OuterRadiusPx = 150 },
		"inner_diameter_mm": func(s *Settings) { s.InnerDiameterMM = 0 },
		"outer_diameter_mm": func(s *Settings) { s.OuterDiameterMM = math.Inf(1) },
		"height_mm":         func(s *Settings) { s.HeightMM = 0 },
		"grid_px":           func(s *Settings) { s.GridPx = 1 },
		"k_low":             func(s *Settings) { s.KLow = 9 },
		"k_high":            func(s *Settings) { s.KHigh = math.NaN() },
		"scratch_ratio":     func(s *Settings) { s.ScratchRatio = 0 },
		"polarity":          func(s *Settings) { s.Polarity = "up" },
		"centre_x_px":       func(s *Settings) { s.CentreXPx = -1 },
		"centre_y_px":       func(s *Settings) { s.CentreYPx = math.NaN() },
	} {
		s := Default
		change(&s)
		if err := s.Check(); err == nil || !strings.HasPrefix(err.Error(), key+": got ") {
			t.Errorf("%s: got %v", key, err)
		}
	}
}
