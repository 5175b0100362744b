package stagepb

import (
	"fmt"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"
	"time"

	"google.golang.org/protobuf/proto"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// fill gives every field below v a value that is not zero, so that a field which a
// converter forgets comes back different.
func fill(rng *rand.Rand, v reflect.Value) {
	switch v.Kind() {
	case reflect.Struct:
		for i := range v.NumField() {
			fill(rng, v.Field(i))
		}
	case reflect.Pointer:
		if v.Type() == reflect.TypeFor[*raster.Plane]() {
			return
		}
		v.Set(reflect.New(v.Type().Elem()))
		fill(rng, v.Elem())
	case reflect.Uint32:
		v.SetUint(uint64(raster.Mono8))
	case reflect.Slice:
		v.Set(reflect.MakeSlice(v.Type(), 2, 2))
		for i := range v.Len() {
			fill(rng, v.Index(i))
		}
	case reflect.String:
		v.SetString(fmt.Sprintf("word µ%d", rng.IntN(1e9)))
	case reflect.Int:
		v.SetInt(1 + rng.Int64N(1<<30))
	case reflect.Float64:
		v.SetFloat(1 + 1e3*rng.Float64())
	case reflect.Bool:
		v.SetBool(true)
	default:
		panic("a kind of field that the test cannot fill: " + v.Type().String())
	}
}

func filled[P any](rng *rand.Rand) P {
	var p P
	fill(rng, reflect.ValueOf(&p).Elem())
	return p
}

// overWire goes through bytes, so that what does not survive the wire is seen too.
func overWire[M proto.Message](t *testing.T, m M) M {
	t.Helper()
	b, err := proto.Marshal(m)
	if err != nil {
		t.Fatal(err)
	}
	out := m.ProtoReflect().New().Interface().(M)
	if err := proto.Unmarshal(b, out); err != nil {
		t.Fatal(err)
	}
	return out
}

func sampleItem(rng *rand.Rand) *pipeline.Item {
	const w, h = 7, 5
	raw := raster.NewRaw(raster.Mono12p, w, h)
	for i := range raw.Data {
		raw.Data[i] = byte(rng.IntN(256))
	}
	plane := raster.NewPlane(w, h)
	for i := range plane.Pix {
		plane.Pix[i] = rng.Float32()
	}
	bad, hot := raster.NewMask(w, h), raster.NewMask(w, h)
	bad.Set(6, 4, true)
	bad.Set(0, 0, true)
	hot.Set(3, 2, true)
	item := &pipeline.Item{View: "ring", BadMask: bad, SaturatedAt: hot, Truncated: true,
		Geometry: pipeline.Distorted{Planar: filled[pipeline.Planar](rng), Lens: filled[pipeline.Distortion](rng)},
		Region: pipeline.NewRegion(w, h, 3, 2, 2.5, []pipeline.Zone{
			{Name: "clear", Spans: []raster.Span{{Y: 1, X0: 2, X1: 5}}, AreaMM2: 3, EquivalentDiameterMM: 2}, {Name: "rim", Spans: []raster.Span{{Y: 0, X0: 0, X1: 7}}}}),
		Planes:       map[string]pipeline.NamedPlane{"snr": {Unit: "sigma", Pixels: plane, OriginX: 1, OriginY: 2, Step: 3}, "other": {Pixels: plane, Step: 1}},
		Measurements: filled[[]pipeline.Measurement](rng), Proofs: filled[[]pipeline.Proof](rng), Defects: filled[[]pipeline.Defect](rng), Coverage: filled[pipeline.Coverage](rng)}
	item.Grid = &raster.Grid{CellPx: 4, Columns: 2, Rows: 1, Level: []float64{1, 2}, Noise: []float64{3, 4}, Inside: []int{5, 6}, Valid: []int{4, 6}, Filled: []bool{true, false}}
	item.CoverageMap = &pipeline.CoverageMap{CellPx: 4, Columns: 2, Rows: 1, DigUM: []int{-1, 20}, ScratchUM: []int{0, 3}, NoisyShare: 0.1, UnseenShare: 0.2, SaturatedShare: 0.3}
	degrees := 21.5
	h0 := pipeline.FrameHeader{CameraID: "c1", FrameCounter: 1 << 40, SensorC: &degrees, Captured: time.Unix(12, 34).UTC(), Tags: map[string]string{"tool": "7"}, View: "ring", Count: 1, Stride: raw.Stride,
		Capture: pipeline.Capture{Format: raw.Format, Width: w, Height: h, ExposureUS: 900, GainDB: 2, BlackLevel: 6, OffsetX: 1, OffsetY: 2, BinningX: 3, BinningY: 4}}
	item.Frames = []pipeline.Frame{{Header: h0, Raw: raw}}
	return item
}

var everything = []string{"raw", "snr", "other", ReadsRegion, ReadsDefects, ReadsBadPixels, ReadsSaturatedPixels, ReadsGrid, ReadsCoverageMap}

// sameRegion compares what a region is made of.
func sameRegion(a, b *pipeline.Region) bool {
	aw, ah := a.Size()
	bw, bh := b.Size()
	return aw == bw && ah == bh && a.CentreX == b.CentreX && a.CentreY == b.CentreY && a.RadiusPx == b.RadiusPx && reflect.DeepEqual(a.Zones, b.Zones) &&
		reflect.DeepEqual(a.Mask(), b.Mask())
}

func TestItemRoundTrip(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	for range 20 {
		in := sampleItem(rng)
		m, err := FromItem(in, everything, InMessage)
		if err != nil {
			t.Fatal(err)
		}
		got, err := ToItem(overWire(t, m), FromMessage)
		if err != nil {
			t.Fatal(err)
		}
		if !sameRegion(got.Region, in.Region) {
			t.Fatalf("the region came back different: %+v, want %+v", got.Region, in.Region)
		}
		got.Region = in.Region // it makes its mask when asked, which cannot be compared
		if !reflect.DeepEqual(got, in) {
			t.Fatalf("came back different\n got %+v\nwant %+v", got, in)
		}
	}
}

func TestUnitRoundTrip(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	view := sampleItem(rng)
	m, err := FromItem(&pipeline.Item{Views: []*pipeline.Item{view}, Defects: filled[[]pipeline.Defect](rng)}, []string{ReadsDefects}, InMessage)
	if err != nil {
		t.Fatal(err)
	}
	got, err := ToItem(overWire(t, m), FromMessage)
	if err != nil {
		t.Fatal(err)
	}
	v := got.Views[0]
	if !reflect.DeepEqual(v.Defects, view.Defects) || !sameRegion(v.Region, view.Region) || !reflect.DeepEqual(v.Geometry, view.Geometry) || v.View != "ring" || len(got.Defects) != 2 {
		t.Errorf("got %+v", v)
	}
	if v.Frames != nil || v.Planes != nil {
		t.Error("a unit's views carry pixels")
	}
}

func TestOnlyWhatIsReadIsSent(t *testing.T) {
	m, err := FromItem(sampleItem(rand.New(rand.NewPCG(5, 6))), []string{"snr"}, InMessage)
	if err != nil {
		t.Fatal(err)
	}
	if len(m.Planes) != 1 || m.Planes[0].Name != "snr" || m.Frames != nil || m.Region != nil || m.Defects != nil || m.BadPixels != nil {
		t.Errorf("got %v", m)
	}
}

func TestCalibrationRoundTrip(t *testing.T) {
	dark := raster.NewPlane(3, 2)
	dark.Set(2, 1, 5)
	in := filled[pipeline.Calibration](rand.New(rand.NewPCG(9, 9)))
	in.Dark, in.Stray, in.Response, in.MadeAt, in.Scale.Source = dark, nil, dark, "", ""
	checkCalibration(t, &in)
	checkCalibration(t, &pipeline.Calibration{Hash: "h", Dark: dark, Response: dark, BadPixels: []pipeline.PixelAt{{X: 1, Y: 2}},
		Noise: pipeline.NoiseModel{GainDNPerE: 0.1, DarkDN: 2}, Scale: pipeline.Scale{UMPerPx: 10, UncertaintyUM: 0.1}})
	others, err := FromCalibrations(map[string]*pipeline.Calibration{"bar": &in, "none": nil})
	if err != nil || len(others) != 1 || others["bar"].Dark != nil {
		t.Fatalf("got %v, %v", others, err)
	}
	back, err := ToCalibrations(others, FromMessage)
	if err != nil || back["bar"].Light != in.Light || !reflect.DeepEqual(back["bar"].Sizing, in.Sizing) {
		t.Errorf("got %+v, %v", back, err)
	}
}

func checkCalibration(t *testing.T, in *pipeline.Calibration) {
	t.Helper()
	m, err := FromCalibration(in, InMessage)
	if err != nil {
		t.Fatal(err)
	}
	got, err := ToCalibration(overWire(t, m), FromMessage)
	if err != nil || !reflect.DeepEqual(got, in) {
		t.Errorf("got %+v, %v, want %+v", got, err, in)
	}
}

// Every field of the contract's Defect is written by its converter.
func TestEveryFieldOfADefectIsSet(t *testing.T) {
	m := FromDefect(filled[pipeline.Defect](rand.New(rand.NewPCG(7, 8)))).ProtoReflect()
	for i := range m.Descriptor().Fields().Len() {
		if f := m.Descriptor().Fields().Get(i); !m.Has(f) {
			t.Errorf("%s is not set", f.Name())
		}
	}
}

// What cannot be true is refused by name, and never panics.
func TestFaultyMessages(t *testing.T) {
	plane := func(change func(*Plane)) func() error {
		return func() error {
			p := &Plane{Name: "snr", Width: 2, Height: 2, Stride: 2, Pixels: &Pixels{Where: &Pixels_Data{Data: make([]byte, 16)}}}
			change(p)
			_, err := ToPlane(p, FromMessage)
			return err
		}
	}
	region := func(runs ...int32) func() error {
		return func() error {
			_, err := ToRegion(&Region{Width: 4, Height: 4, Zones: []*Zone{{Name: "all", Runs: runs}}})
			return err
		}
	}
	for want, fault := range map[string]func() error{
		`plane "snr": got 0 × 2 px`:              plane(func(p *Plane) { p.Width = 0 }),
		`plane "snr": got 2 × 70000 px`:          plane(func(p *Plane) { p.Height = 70000 }),
		`plane "snr": stride: got 1 px, want 2`:  plane(func(p *Plane) { p.Stride = 1 }),
		`plane "snr": got 16 bytes, want 24`:     plane(func(p *Plane) { p.Height = 3 }),
		`plane "snr": pixels: got none`:          plane(func(p *Plane) { p.Pixels = nil }),
		`zone "all": runs: got 2 numbers`:        region(1, 2),
		`zone "all": runs: run y 4, x 0 to 1`:    region(4, 0, 1),
		`zone "all": runs: run y 0, x 0 to 5`:    region(0, 0, 5),
		`zone "all": runs: run y 0, x 3 to 2`:    region(0, 3, 2),
		`runs: they overlap, together they hold`: region(0, 0, 4, 1, 0, 4, 2, 0, 4, 3, 0, 4, 0, 0, 1),
		`defects[0]: path_xy: got 1 numbers`:     func() error { _, err := ToDefects([]*Defect{{PathXy: []float64{1}}}); return err },
		`frame 0: pixel_format: got 0x00000000`: func() error {
			_, err := ToFrame(&Frame{Pixels: &Pixels{Where: &Pixels_Data{}}}, FromMessage)
			return err
		},
		`plane "snr": given twice`:                  twice,
		`a geometry of type stagepb.odd cannot be`:  func() error { _, err := FromGeometry(odd{}); return err },
		`got 0 × 0 px, want 1 to 65535 a side`:      func() error { _, err := ToMask(&Mask{}); return err },
		`calibration: plane "": got 0 × 0 px, want`: func() error { _, err := ToCalibration(&Calibration{Dark: &Plane{}}, FromMessage); return err },
	} {
		if err := fault(); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, want %q", err, want)
		}
	}
}

func twice() error {
	p := &Plane{Name: "snr", Width: 1, Height: 1, Stride: 1, Pixels: &Pixels{Where: &Pixels_Data{Data: make([]byte, 4)}}}
	_, err := ToPlanes([]*Plane{p, p}, FromMessage)
	return err
}

type odd struct{ pipeline.Geometry }

// Bytes that are not aligned for float32 are copied, not cast.
func TestUnalignedValues(t *testing.T) {
	b := make([]byte, 9)
	copy(b[1:], bytesOf([]float32{1.5, -2}))
	if got := floatsOf(b[1:]); got[0] != 1.5 || got[1] != -2 {
		t.Errorf("got %v", got)
	}
}

// A geometry comes back as the kind that it is, number for number.
func TestGeometryRoundTrip(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	for _, want := range []pipeline.Geometry{filled[pipeline.Planar](rng), filled[pipeline.Distorted](rng), filled[pipeline.Annulus](rng)} {
		m, err := FromGeometry(want)
		if err != nil {
			t.Fatal(err)
		}
		if got := ToGeometry(overWire(t, m)); !reflect.DeepEqual(got, want) {
			t.Errorf("got %#v, want %#v", got, want)
		}
	}
}
