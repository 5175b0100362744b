// Package flatfield is the stage that turns counts into corrected counts with the
// view's calibration. It makes no calibration and looks for no defect.
package flatfield

import (
	"context"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Settings of the stage.
type Settings struct {
	// MinResponse is the smallest response, as a share of the mean, that is divided by;
	// a pixel with less is treated as bad. It must be above 0 and below 1.
	MinResponse float64 `json:"min_response" yaml:"min_response"`
}

// Default divides by everything down to a twentieth of the mean response.
var Default = Settings{MinResponse: 0.05}

// Check implements pipeline.Checker.
func (s Settings) Check() error {
	if !(s.MinResponse > 0 && s.MinResponse < 1) {
		return pipeline.Invalid("min_response: got %g, want above 0 and below 1", s.MinResponse)
	}
	return nil
}

// Factory describes the stage.
var Factory = pipeline.Make(pipeline.Factory{
	Type: "flatfield", Version: "1", Scope: pipeline.ScopeView,
	Summary: "Corrects counts: (raw − dark − stray) / response, with bad pixels replaced.",
	Reads:   []string{pipeline.RawPlane, "calibration"},
	Writes:  []string{pipeline.CorrectedPlane, "bad pixels", "saturated pixels"},
}, Default, func(s Settings, _ pipeline.Environment) (pipeline.Stage, error) { return stage{s}, nil })

type stage struct{ s Settings }

// Run implements pipeline.Stage. Without a calibration the corrected plane is the raw
// one. Differences are signed: counts below dark stay below 0.
func (st stage) Run(ctx context.Context, item *pipeline.Item) error {
	raw, err := item.Raw()
	if err != nil {
		return err
	}
	if len(item.Frames) == 0 {
		return pipeline.Invalid("view %q has no frame", item.View)
	}
	item.SaturatedAt = saturated(raw, float32(item.Frames[0].Raw.Format.MaxCount()))
	if item.Calibration == nil {
		item.BadMask = nil
		item.SetPlane(pipeline.CorrectedPlane, "DN", raw)
		return ctx.Err()
	}
	if err := checkSizes(raw, item.Calibration); err != nil {
		return err
	}
	corrected := raster.NewPlane(raw.Width, raw.Height)
	bad := raster.NewMask(raw.Width, raw.Height)
	for y := range raw.Height {
		st.correctRow(corrected.Row(y), bad.Row(y), raw.Row(y), item.Calibration, y)
	}
	for _, p := range item.Calibration.BadPixels {
		if p.X >= 0 && p.Y >= 0 && p.X < raw.Width && p.Y < raw.Height {
			bad.Set(p.X, p.Y, true)
		}
	}
	raster.ReplaceBad(corrected, bad)
	item.BadMask = bad
	item.SetPlane(pipeline.CorrectedPlane, "DN", corrected)
	return ctx.Err()
}

func (st stage) correctRow(dst []float32, bad []bool, raw []float32, c *pipeline.Calibration, y int) {
	copy(dst, raw)
	if c.Dark != nil {
		subtract(dst, c.Dark.Row(y))
	}
	if c.Stray != nil {
		subtract(dst, c.Stray.Row(y))
	}
	if c.Response == nil {
		return
	}
	least := float32(st.s.MinResponse)
	for x, r := range c.Response.Row(y) {
		if r >= least { // false for NaN too
			dst[x] /= r
		} else {
			bad[x] = true
		}
	}
}

func subtract(dst, v []float32) {
	for x := range dst {
		dst[x] -= v[x]
	}
}

func checkSizes(raw *raster.Plane, c *pipeline.Calibration) error {
	for name, p := range map[string]*raster.Plane{"dark": c.Dark, "stray": c.Stray, "response": c.Response} {
		if p != nil && !p.SameSize(raw) {
			return pipeline.Invalid("calibration %s: got %d × %d px, the frame has %d × %d", name, p.Width, p.Height, raw.Width, raw.Height)
		}
	}
	return nil
}

// saturated returns the pixels at the top of the format's range; nil where there is none.
func saturated(raw *raster.Plane, limit float32) *raster.Mask {
	var out *raster.Mask
	for y := range raw.Height {
		for x, v := range raw.Row(y) {
			if v >= limit {
				if out == nil {
					out = raster.NewMask(raw.Width, raw.Height)
				}
				out.Set(x, y, true)
			}
		}
	}
	return out
}
