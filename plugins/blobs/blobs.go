// Package blobs is the stage that makes defects of the connected bright spots of the
// snr plane and measures them. It joins no pieces and judges no limits.
package blobs

import (
	"context"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Factory describes the stage.
var Factory = pipeline.Make(pipeline.Factory{
	Type: "blobs", Version: "1", Scope: pipeline.ScopeView,
	Summary: "Finds connected sets of pixels above two thresholds of the snr plane and measures each at half its own height.",
	Reads: []string{pipeline.CorrectedPlane, pipeline.BackgroundPlane, pipeline.NoisePlane, pipeline.SNRPlane,
		"region", "geometry", "saturated pixels", "calibration"},
	Writes: []string{"defects"},
}, Default, func(s Settings, _ pipeline.Environment) (pipeline.Stage, error) { return stage{s}, nil })

type stage struct{ s Settings }

// planes are what the stage reads.
type planes struct{ corrected, background, noise, snr *raster.Plane }

// Run implements pipeline.Stage. Defects are added to those already there.
func (st stage) Run(ctx context.Context, item *pipeline.Item) error {
	p, err := read(item)
	if err != nil {
		return err
	}
	blobs := slices.DeleteFunc(raster.Label(p.snr, float32(st.s.KLow), float32(st.s.KHigh)),
		func(b raster.Blob) bool { return raster.SpanArea(b.Spans) < st.s.MinAreaPx })
	if len(blobs) > pipeline.MaxDefects {
		blobs, item.Truncated = strongest(blobs), true
	}
	signal := raster.NewPlane(p.snr.Width, p.snr.Height)
	raster.Subtract(signal, p.corrected, p.background)
	measurer := raster.NewMeasurer(signal, p.noise, item.Region.Mask(), blobs)
	defects := slices.Clone(item.Defects)
	for i, b := range blobs {
		if err := ctx.Err(); err != nil {
			return err
		}
		defects = append(defects, st.defect(item, measurer.Measure(i), b.Spans))
	}
	item.Defects = defects
	return ctx.Err()
}

func read(item *pipeline.Item) (p planes, err error) {
	for _, n := range []struct {
		name string
		dst  **raster.Plane
	}{{pipeline.CorrectedPlane, &p.corrected}, {pipeline.BackgroundPlane, &p.background},
		{pipeline.NoisePlane, &p.noise}, {pipeline.SNRPlane, &p.snr}} {
		if *n.dst, err = item.Plane(n.name); err != nil {
			return p, err
		}
		if !p.corrected.SameSize(*n.dst) {
			return p, pipeline.Invalid("the %s plane has %d × %d px, the corrected one %d × %d", n.name,
				(*n.dst).Width, (*n.dst).Height, p.corrected.Width, p.corrected.Height)
		}
	}
	switch {
	case item.Region == nil:
		return p, pipeline.Invalid("view %q has no region; put the stage region earlier in the recipe", item.View)
	case item.Region.Mask().Width != p.snr.Width || item.Region.Mask().Height != p.snr.Height:
		return p, pipeline.Invalid("the region does not have the size of the picture (%d × %d px)", p.snr.Width, p.snr.Height)
	case item.Geometry == nil:
		return p, pipeline.Invalid("view %q has no geometry", item.View)
	}
	return p, nil
}

// strongest keeps the MaxDefects blobs with the highest peaks, in their old order.
func strongest(blobs []raster.Blob) []raster.Blob {
	peaks := make([]float32, len(blobs))
	for i, b := range blobs {
		peaks[i] = b.Peak
	}
	slices.Sort(peaks)
	least := peaks[len(peaks)-pipeline.MaxDefects]
	kept := slices.DeleteFunc(blobs, func(b raster.Blob) bool { return b.Peak < least })
	return kept[:pipeline.MaxDefects]
}
