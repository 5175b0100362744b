package stagetest

import (
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

func sample() *pipeline.Item {
	raw := Scene()
	item := &pipeline.Item{View: "ring", Frames: []pipeline.Frame{{Raw: raw}}, Geometry: pipeline.Planar{UMPerPx: 10},
		BadMask: raster.NewMask(3, 3), Region: pipeline.NewRegion(3, 3, 1, 1, 0, []pipeline.Zone{{Name: "all", Spans: []raster.Span{{Y: 0, X0: 0, X1: 3}}}})}
	item.SetPlane("snr", "sigma", raster.NewPlane(3, 3))
	item.Defects = []pipeline.Defect{{Place: pipeline.Place{XPx: 1}, Path: []pipeline.Point{{X: 1}}}}
	item.Measure("noise_dn", 1, "DN")
	return item
}

// The suite rests on the digest: whatever a stage might change in place must change it.
func TestDigestSeesEveryChange(t *testing.T) {
	want := Digest(sample())
	if Digest(sample()) != want {
		t.Fatal("equal items differ")
	}
	for name, change := range map[string]func(*pipeline.Item){
		"plane":       func(i *pipeline.Item) { i.Planes["snr"].Pixels.Pix[4] = 1e-30 },
		"frame":       func(i *pipeline.Item) { i.Frames[0].Raw.Data[7]++ },
		"bad mask":    func(i *pipeline.Item) { i.BadMask.Bits[8] = true },
		"saturated":   func(i *pipeline.Item) { i.SaturatedAt = raster.NewMask(3, 3) },
		"region":      func(i *pipeline.Item) { i.Region.Mask().Bits[5] = true },
		"zone":        func(i *pipeline.Item) { i.Region.Zones[0].Spans[0].X1 = 2 },
		"defect":      func(i *pipeline.Item) { i.Defects[0].SNR = 1 },
		"path":        func(i *pipeline.Item) { i.Defects[0].Path[0].Y = 1 },
		"measurement": func(i *pipeline.Item) { i.Measurements[0].Value = 2 },
		"proof":       func(i *pipeline.Item) { i.Prove(pipeline.Proof{Name: "part"}) },
		"coverage":    func(i *pipeline.Item) { i.Coverage.MaskedPx = 1 },
		"grid":        func(i *pipeline.Item) { i.Grid = &raster.Grid{CellPx: 1} },
		"cells":       func(i *pipeline.Item) { i.CoverageMap = &pipeline.CoverageMap{DigUM: []int{1}} },
		"new plane":   func(i *pipeline.Item) { i.SetPlane("noise", "DN", raster.NewPlane(1, 1)) },
	} {
		item := sample()
		change(item)
		if Digest(item) == want {
			t.Errorf("%s: the digest stays the same", name)
		}
	}
}
