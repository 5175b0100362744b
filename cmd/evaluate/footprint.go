package main

import (
	"fmt"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/plugins/blobs"
)

// footprints are the pixels of a view's defects, by id.
type footprints map[int][]raster.Span

// footprintsOf finds the pixels of a view's defects again from its snr plane, with the
// thresholds of its blobs stage.
func footprintsOf(item *pipeline.Item, s blobs.Settings) (footprints, error) {
	snr, err := item.Plane(pipeline.SNRPlane)
	if err != nil {
		return nil, err
	}
	byBox := map[pipeline.Box][]raster.Span{}
	for _, b := range raster.Label(snr, float32(s.KLow), float32(s.KHigh)) {
		x0, y0, x1, y1 := boundsOf(b.Spans)
		box := pipeline.Box{X0: x0, Y0: y0, X1: x1, Y1: y1}
		byBox[box] = append(byBox[box], b.Spans...) // of two in one box the pixels of both
	}
	out := footprints{}
	for _, d := range item.Defects {
		spans, ok := byBox[d.Box]
		if !ok {
			return nil, fmt.Errorf("defect %d of view %s: nothing in the snr plane has its box %+v", d.ID, item.View, d.Box)
		}
		out[d.ID] = spans
	}
	return out, nil
}

// blobSettings returns the settings of the blobs stage of a view.
func blobSettings(v pipeline.RecipeView) (blobs.Settings, error) {
	s := blobs.Default
	for _, stage := range v.Stages {
		if stage.Type == blobs.Factory.Type && stage.Decode != nil {
			return s, stage.Decode(&s)
		}
	}
	return s, nil
}
