package builtin

import (
	"context"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/plugins/stagetest"
)

func TestCatalogueHasTheStages(t *testing.T) {
	cat, err := Catalogue()
	if err != nil {
		t.Fatal(err)
	}
	for _, typ := range []string{"region", "flatfield", "darkfield", "blobs", "merge", "classify"} {
		if _, err := cat.Factory(typ); err != nil {
			t.Error(err)
		}
	}
}

// Every stage passes the suite, after those that stand before it in the usual order.
func TestStagesConform(t *testing.T) {
	for i, f := range Stages() {
		t.Run(f.Type, func(t *testing.T) {
			stagetest.Run(t, f, func(raw raster.Raw) *pipeline.Item {
				item := view(raw)
				for _, before := range Stages()[:i] {
					if before.Scope == pipeline.ScopeView {
						runStage(t, before, item)
					}
				}
				if f.Scope == pipeline.ScopeUnit {
					return &pipeline.Item{Views: []*pipeline.Item{item}, Defects: item.Defects}
				}
				return item
			})
		})
	}
}

func view(raw raster.Raw) *pipeline.Item {
	w, h := raw.Width, raw.Height
	dark, response := raster.NewPlane(w, h), raster.NewPlane(w, h)
	for i := range response.Pix {
		dark.Pix[i] = float32(i % 3)
		response.Pix[i] = 0.9 + 0.05*float32(i%5)
	}
	cal := &pipeline.Calibration{Hash: "test", Dark: dark, Response: response, BadPixels: []pipeline.PixelAt{{X: 0, Y: 0}, {X: 75, Y: 60}}}
	return &pipeline.Item{View: "ring", Frames: []pipeline.Frame{{Raw: raw}}, Calibration: cal, Geometry: pipeline.Planar{UMPerPx: 10}}
}

func runStage(t *testing.T, f pipeline.Factory, item *pipeline.Item) {
	t.Helper()
	stage, _, err := f.New(nil, pipeline.Environment{View: item.View, Calibration: item.Calibration, Geometry: item.Geometry})
	if err != nil {
		t.Fatal(err)
	}
	if err := stage.Run(context.Background(), item); err != nil {
		t.Fatalf("%s: %v", f.Type, err)
	}
}
