package flatfield

import (
	"context"
	"math"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

func plane(width int, v ...float32) *raster.Plane {
	return &raster.Plane{Pix: v, Width: width, Height: len(v) / width, Stride: width}
}

func run(t *testing.T, raw raster.Raw, c *pipeline.Calibration) (*pipeline.Item, error) {
	t.Helper()
	stage, _, err := Factory.New(nil, pipeline.Environment{Calibration: c})
	if err != nil {
		t.Fatal(err)
	}
	item := &pipeline.Item{View: "ring", Frames: []pipeline.Frame{{Raw: raw}}, Calibration: c}
	return item, stage.Run(context.Background(), item)
}

// (raw − dark − stray) / response by hand; what is below dark stays negative; the bad pixels
// take the median of their good neighbours.
func TestCorrection(t *testing.T) {
	raw := raster.Pack(raster.Mono8, []uint16{10, 20, 30, 255, 9, 200, 4, 50, 60}, 3, 3)
	c := &pipeline.Calibration{
		Dark:      plane(3, 5, 5, 5, 5, 5, 5, 5, 5, 5),
		Stray:     plane(3, 1, 1, 1, 1, 1, 1, 1, 1, 1),
		Response:  plane(3, 1, 2, 0.5, 1, 1, 0.01, 1, 1, 1),
		BadPixels: []pipeline.PixelAt{{X: 1, Y: 1}, {X: 40, Y: -1}},
	}
	item, err := run(t, raw, c)
	if err != nil {
		t.Fatal(err)
	}
	got, _ := item.Plane(pipeline.CorrectedPlane)
	want := []float32{4, 7, 48, 249, 44, 46, -2, 44, 54} // medians of {4 7 48 249 −2 44 54} and {7 48 44 54}
	for i, w := range want {
		if math.Abs(float64(got.Pix[i]-w)) > 1e-5 {
			t.Errorf("pixel %d: %g, want %g", i, got.Pix[i], w)
		}
	}
	if item.BadMask.Count() != 2 || !item.BadMask.At(1, 1) || !item.BadMask.At(2, 1) {
		t.Error("want the listed pixel and the one without response in the bad mask")
	}
	if item.SaturatedAt.Count() != 1 || !item.SaturatedAt.At(0, 1) {
		t.Error("want the pixel of 255 DN saturated")
	}
}

func TestWithoutCalibrationCountsStay(t *testing.T) {
	item, err := run(t, raster.Pack(raster.Mono10p, []uint16{0, 5, 1000, 1022}, 2, 2), nil)
	if err != nil {
		t.Fatal(err)
	}
	got, _ := item.Plane(pipeline.CorrectedPlane)
	if got.Pix[2] != 1000 || item.BadMask != nil || item.SaturatedAt != nil {
		t.Errorf("got %v, bad %v, saturated %v", got.Pix, item.BadMask, item.SaturatedAt)
	}
}

func TestCalibrationOfAnotherSizeIsRefused(t *testing.T) {
	_, err := run(t, raster.NewRaw(raster.Mono8, 4, 4), &pipeline.Calibration{Dark: raster.NewPlane(4, 3)})
	if pipeline.KindOf(err) != pipeline.InvalidKind {
		t.Errorf("got %v", err)
	}
}

func TestCheck(t *testing.T) {
	for _, v := range []float64{0, 1, math.NaN(), -1} {
		if (Settings{MinResponse: v}).Check() == nil {
			t.Errorf("min_response %g passed", v)
		}
	}
}
