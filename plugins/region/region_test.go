package region

import (
	"bytes"
	"context"
	"errors"
	"image"
	"image/color"
	"image/png"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/render"
	"lapgate/plugins/stagetest"
)

const umPerPx = 50.

// part draws a bright disc of the diameter given on a frame of 320 × 300 px.
func part(diameterMM, x, y float64) raster.Raw {
	random := rand.New(rand.NewPCG(4, 4))
	counts := make([]uint16, 320*300)
	for i := range counts {
		d := math.Hypot(float64(i%320)-x, float64(i/320)-y) - diameterMM*1000/umPerPx/2
		counts[i] = uint16(max(6+15*math.Erfc(d/1.4)/2+random.NormFloat64(), 0))
	}
	return raster.Pack(raster.Mono8, counts, 320, 300)
}

func settings(change func(*Settings)) pipeline.Decode {
	return func(dst any) error { change(dst.(*Settings)); return nil }
}

func run(t *testing.T, raw raster.Raw, decode pipeline.Decode, read func(string) ([]byte, error)) (*pipeline.Item, Settings) {
	t.Helper()
	env := pipeline.Environment{View: "ring", Geometry: pipeline.Planar{UMPerPx: umPerPx}, ReadFile: read}
	stage, effective, err := Factory.New(decode, env)
	if err != nil {
		t.Fatal(err)
	}
	item := &pipeline.Item{View: "ring", Frames: []pipeline.Frame{{Raw: raw}}, Geometry: env.Geometry}
	if err := stage.Run(context.Background(), item); err != nil {
		t.Fatal(err)
	}
	return item, effective.(Settings)
}

func disc12(s *Settings) {
	s.Shape, s.DiameterMM, s.DiameterToleranceMM, s.RimMM = FoundCircle, 12, 0.1, 0.5
	s.Zones = []ZoneSettings{{Name: "clear", DiameterMM: 8}, {Name: "outer"}}
}

// Through a barrel the disc is a little smaller in px; it is measured and laid out as the
// 12 mm it has, by the map, while the scale at the lens's centre alone would give 11.94.
func TestDistortionIsAllowedFor(t *testing.T) {
	lens := pipeline.Distortion{K1: -0.0166, CentreX: 160, CentreY: 150, NormPx: 219.3}
	seen, _ := lens.Seen(160+120, 150)
	radius := seen - 160
	env := pipeline.Environment{View: "ring", Geometry: pipeline.Distorted{Planar: pipeline.Planar{UMPerPx: umPerPx}, Lens: lens}}
	stage, _, err := Factory.New(settings(disc12), env)
	if err != nil {
		t.Fatal(err)
	}
	item := &pipeline.Item{View: "ring", Frames: []pipeline.Frame{{Raw: part(2*radius*umPerPx/1000, 160, 150)}}, Geometry: env.Geometry}
	if err := stage.Run(context.Background(), item); err != nil {
		t.Fatal(err)
	}
	if d, _ := item.Number("part_diameter_mm"); math.Abs(d-12) > 0.01 || radius > 119.5 {
		t.Errorf("diameter %.3f mm from a radius of %.2f px, want 12", d, radius)
	}
	inner, _ := lens.Seen(160+80, 150)
	if d := item.Region.Zones[0].EdgeDistancePx(item.Region.CentreX, item.Region.CentreY); math.Abs(d-(inner-160)) > 0.05 {
		t.Errorf("zone of 8 mm reaches to %.2f px, want %.2f", d, inner-160)
	}
}

func TestPartIsFoundWithItsZones(t *testing.T) {
	item, _ := run(t, part(12, 161.3, 148.6), settings(disc12), nil)
	r := item.Region
	if math.Hypot(r.CentreX-161.3, r.CentreY-148.6) > 0.1 || math.Abs(r.RadiusPx-120) > 0.1 {
		t.Errorf("found (%.2f, %.2f) radius %.2f px", r.CentreX, r.CentreY, r.RadiusPx)
	}
	if p := item.Proofs[0]; p.Name != "part" || !p.OK || math.Abs(p.Value-12) > 0.01 {
		t.Errorf("proof %+v", p)
	}
	for at, want := range map[[2]float64]string{{161, 149}: "clear", {161 + 79, 149}: "clear", {161 + 82, 149}: "outer", {161, 149 - 108}: "outer", {161 + 112, 149}: "", {0, 0}: ""} {
		if z, _ := r.ZoneAt(at[0], at[1]); z.Name != want {
			t.Errorf("zone at %v: %q, want %q", at, z.Name, want)
		}
	}
	// π/4·D² of 8 mm and of the part less its rim, 11 mm; both are discs, the first goes before.
	if a, b := r.Zones[0].AreaMM2, r.Zones[1].AreaMM2; math.Abs(a-50.265482) > 1e-5 || math.Abs(b-95.033178) > 1e-5 || r.Zones[1].EquivalentDiameterMM != 11 {
		t.Errorf("areas %.5f and %.5f mm²", a, b)
	}
	if d := r.Zones[0].EdgeDistancePx(r.CentreX+70, r.CentreY); math.Abs(d-10) > 1e-9 {
		t.Errorf("edge distance %.3f px, want 10", d)
	}
	if u, v, _ := item.Geometry.ToStation(r.CentreX, r.CentreY-20); math.Abs(u) > 1e-6 || math.Abs(v-1000) > 1e-6 {
		t.Errorf("station (%g, %g) µm, want (0, 1000)", u, v)
	}
}

// An empty nest, a part of the wrong size and a part out of reach prove nothing.
func TestPartThatIsNotThere(t *testing.T) {
	for name, raw := range map[string]raster.Raw{"empty nest": part(0.0001, -900, -900), "much too small": part(9, 160, 150), "black": raster.NewRaw(raster.Mono12, 320, 300)} {
		item, _ := run(t, raw, settings(disc12), nil)
		p := item.Proofs[0]
		if p.OK || p.Reason == "" || item.Region == nil || item.Region.Mask().Count() != 0 {
			t.Errorf("%s: proof %+v, want a failed one and an empty region", name, p)
		}
	}
	item, _ := run(t, part(9, 160, 150), settings(disc12), nil)
	if p := item.Proofs[0]; p.OK || math.Abs(p.Value-9) > 0.01 || !strings.Contains(p.Reason, "another part") {
		t.Errorf("another part: proof %+v", p)
	}
	item, _ = run(t, part(12.15, 160, 150), settings(disc12), nil)
	if p := item.Proofs[0]; p.OK || math.Abs(p.Value-12.15) > 0.01 || !strings.Contains(p.Reason, "want 11.900 to 12.100") {
		t.Errorf("too large: proof %+v", p)
	}
}

func TestEdgeOutOfFocusFails(t *testing.T) {
	sharp := settings(func(s *Settings) { disc12(s); s.MaxEdgeWidthPx = 1.5 })
	item, _ := run(t, part(12, 160, 150), sharp, nil) // Gaussian edge of 1 px: 10–90 % is 2.56 px
	if p := item.Proofs[1]; p.Name != "focus" || p.OK || p.Value < 2 || p.Value > 3.5 {
		t.Errorf("proof %+v", p)
	}
}

func TestTheCalibrationMustKnowTheEdgeWhereAsked(t *testing.T) {
	decode := settings(func(s *Settings) { disc12(s); s.NeedPartEdge = true })
	env := pipeline.Environment{Geometry: pipeline.Planar{UMPerPx: umPerPx}, Calibration: &pipeline.Calibration{}}
	if _, _, err := Factory.New(decode, env); pipeline.KindOf(err) != pipeline.InvalidKind {
		t.Errorf("without an edge in the calibration: got %v", err)
	}
	env.Calibration.PartEdge = &pipeline.PartEdge{WidthPx: 2.5, DiameterPx: 240}
	if _, _, err := Factory.New(decode, env); err != nil {
		t.Error(err)
	}
}

// Lens and camera move away from where they were calibrated, a little at each unit: focus
// and scale go from steady over warning to hold, each by itself.
func TestFocusAndScaleAreWarnedOfBeforeTheyHold(t *testing.T) {
	s := stagetest.SmallScene()
	blur := []float64{0.7, 1.2, 2, 3.5} // px; calibrated at 0.7
	for i, sigma := range blur {
		s.Spoilers = append(s.Spoilers, render.Spoiler{Unit: i, Kind: render.SpoilDefocus, Value: sigma})
	}
	size := []float64{6.01, 6.03, 6.07} // mm as the calibrated scale has them; 6.06 is 1 % closer
	for i, mm := range size {
		s.Spoilers = append(s.Spoilers, render.Spoiler{Unit: len(blur) + i, Kind: render.SpoilDiameter, Value: mm})
	}
	r := stagetest.Render(t, s)
	for view, focus := range map[string]string{"ring": "steady steady warning hold", "back": "steady warning hold hold"} { // a silhouette shows it sooner
		st, _, err := Factory.New(settings(func(s *Settings) {
			s.Shape, s.DiameterMM, s.DiameterToleranceMM, s.Polarity, s.NeedPartEdge = FoundCircle, 6, 0.2, map[string]string{"ring": "rim", "back": "dark"}[view], true
		}), r.Env(view))
		if err != nil {
			t.Fatal(err)
		}
		states := map[string][]string{}
		for i := range len(blur) + len(size) {
			u := r.Unit(i)
			item := r.Item(&u, view)
			if err := st.Run(context.Background(), item); err != nil {
				t.Fatal(err)
			}
			for _, p := range item.Proofs {
				states[p.Name] = append(states[p.Name], p.State())
			}
		}
		for name, want := range map[string]string{
			pipeline.ProofFocus: focus + " steady steady steady", pipeline.ProofScale: "steady steady steady steady steady warning hold",
			pipeline.ProofPart: "steady steady steady steady steady steady steady",
		} {
			if got := strings.Join(states[name], " "); got != want {
				t.Errorf("view %s, %s: %s, want %s", view, name, got, want)
			}
		}
	}
}

func TestPolygonRegion(t *testing.T) {
	item, _ := run(t, part(12, 160, 150), settings(func(s *Settings) {
		s.Shape, s.Polygon = Polygon, []Corner{{9.5, 19.5}, {49.5, 19.5}, {49.5, 39.5}, {9.5, 39.5}}
	}), nil)
	z := item.Region.Zones[0]
	if n := item.Region.Mask().Count(); n != 800 || math.Abs(z.AreaMM2-2) > 1e-9 || z.EdgeDistancePx(29.5, 24.5) != 5 || z.EdgeDistancePx(29.5, 9.5) != -10 {
		t.Errorf("%d px, %g mm², want 800 and 2", n, z.AreaMM2)
	}
	if item.Region.CentreX != 29.5 || item.Region.CentreY != 29.5 {
		t.Errorf("centre (%g, %g), want (29.5, 29.5)", item.Region.CentreX, item.Region.CentreY)
	}
}

func TestMaskRegionAndItsHash(t *testing.T) {
	picture := image.NewGray(image.Rect(0, 0, 320, 300))
	for x := 10; x < 30; x++ {
		picture.Set(x, 5, color.Gray{Y: 1})
	}
	var b bytes.Buffer
	if err := png.Encode(&b, picture); err != nil {
		t.Fatal(err)
	}
	read := func(name string) ([]byte, error) {
		if name != "mask.png" {
			return nil, errors.New("no such file")
		}
		return b.Bytes(), nil
	}
	use := func(s *Settings) { s.Shape, s.MaskFile = MaskImage, "mask.png" }
	item, effective := run(t, part(12, 160, 150), settings(use), read)
	if n := item.Region.Mask().Count(); n != 20 || len(effective.MaskSHA256) != 64 {
		t.Errorf("%d px, hash %q", n, effective.MaskSHA256)
	}
	for _, change := range []func(*Settings){
		func(s *Settings) { use(s); s.MaskFile = "other.png" },
		func(s *Settings) { use(s); s.MaskSHA256 = strings.Repeat("0", 64) },
	} {
		if _, _, err := Factory.New(settings(change), pipeline.Environment{Geometry: pipeline.Planar{UMPerPx: 1}, ReadFile: read}); pipeline.KindOf(err) != pipeline.InvalidKind {
			t.Errorf("got %v", err)
		}
	}
}

func TestFixedCircleOverTheFrameEdge(t *testing.T) {
	item, _ := run(t, part(12, 160, 150), settings(func(s *Settings) {
		s.Shape, s.DiameterMM, s.CentreXPx, s.CentreYPx = Circle, 2, 5, 295
		s.Zones = []ZoneSettings{{Name: "ring", InnerDiameterMM: 1}}
	}), nil)
	n := 0
	for y := range 300 {
		for x := range 320 {
			if d := math.Hypot(float64(x)-5, float64(y)-295); d > 10 && d <= 20 {
				n++
			}
		}
	}
	if got := item.Region.Mask().Count(); got != n {
		t.Errorf("%d px, counted one by one %d", got, n)
	}
}

func TestCheckNamesTheKey(t *testing.T) {
	cases := map[string]func(*Settings){
		"shape": func(s *Settings) { s.Shape = "disc" }, "polarity": func(s *Settings) { s.Polarity = "" },
		"diameter_mm":                 func(s *Settings) { s.Shape = Circle },
		"diameter_tolerance_mm":       func(s *Settings) { s.Shape, s.DiameterMM = FoundCircle, 5 },
		"area_mm2":                    func(s *Settings) { s.Shape = FoundArea },
		"area_tolerance_mm2":          func(s *Settings) { s.Shape, s.AreaMM2, s.AreaToleranceMM2 = FoundArea, 5, 5 },
		"edge_level":                  func(s *Settings) { s.EdgeLevel = 1 },
		"search_px":                   func(s *Settings) { s.SearchPx = math.NaN() },
		"min_edge_share":              func(s *Settings) { s.MinEdgeShare = 1.5 },
		"polygon":                     func(s *Settings) { s.Shape = Polygon },
		"polygon[1]":                  func(s *Settings) { s.Polygon = []Corner{{}, {XPx: math.Inf(1)}} },
		"mask_file":                   func(s *Settings) { s.Shape = MaskImage },
		"zones":                       func(s *Settings) { s.RimMM = 1 },
		"rim_mm":                      func(s *Settings) { disc12(s); s.RimMM = 6 },
		"zones[0].name":               func(s *Settings) { disc12(s); s.Zones[0].Name = "" },
		"zones[1].name":               func(s *Settings) { disc12(s); s.Zones[1].Name = "clear" },
		"zones[0].diameter_mm":        func(s *Settings) { disc12(s); s.Zones[0].DiameterMM = 11.5 },
		"zones[1].inner_diameter_mm":  func(s *Settings) { disc12(s); s.Zones[1].InnerDiameterMM = 11 },
		"zones[0].inner_diameter_mm ": func(s *Settings) { disc12(s); s.Zones[0].InnerDiameterMM = math.NaN() },
	}
	for key, change := range cases {
		s := Default
		change(&s)
		if err := s.Check(); err == nil || !strings.HasPrefix(err.Error(), strings.TrimSpace(key)+": ") {
			t.Errorf("%s: got %v", key, err)
		}
	}
}
