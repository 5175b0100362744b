package detect

import (
	"context"
	"runtime"
	"sync"
	"sync/atomic"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/fused"
	"lapgate/plugins/blobs"
	"lapgate/plugins/darkfield"
	"lapgate/plugins/flatfield"
)

// Fuser returns the fuser. The stages that one fuser makes share the processors: a frame
// that is alone is worked on in as many bands as there are, two frames in half as many each.
func Fuser() pipeline.Fuser {
	working := &atomic.Int32{}
	return pipeline.Fuser{
		Name:      "detect",
		Types:     []string{flatfield.Factory.Type, darkfield.Factory.Type, blobs.Factory.Type},
		Unfusable: []string{pipeline.CorrectedPlane},
		New: func(settings []any, env pipeline.Environment, needed map[string]bool) (pipeline.Stage, error) {
			st := &stage{flat: settings[0].(flatfield.Settings), dark: settings[1].(darkfield.Settings), blobs: settings[2].(blobs.Settings),
				calibration: env.Calibration, needed: needed, working: working}
			if st.settings(1).Check() != nil { // as with cells of an odd size
				return nil, nil
			}
			if c := env.Calibration; c != nil && c.Capture.Width > 0 {
				raw := raster.Raw{Format: c.Capture.Format, Width: c.Capture.Width, Height: c.Capture.Height}
				if _, err := st.correctionFor(raw); err != nil { // the stages themselves may do with it
					return nil, nil
				}
			}
			return st, nil
		},
	}
}

type stage struct {
	flat        flatfield.Settings
	dark        darkfield.Settings
	blobs       blobs.Settings
	calibration *pipeline.Calibration
	needed      map[string]bool
	working     *atomic.Int32

	mu         sync.Mutex // guards what follows
	correction *fused.Correction
	made       raster.Raw // the format and size it is for
	bad        *raster.Mask
}

var polarities = map[string]fused.Polarity{darkfield.Bright: fused.Bright, darkfield.Dark: fused.Dark, darkfield.Both: fused.Both}

func (st *stage) settings(bands int) fused.Settings {
	return fused.Settings{Low: st.blobs.KLow, High: st.blobs.KHigh, Polarity: polarities[st.dark.Polarity],
		MinAreaPx: st.blobs.MinAreaPx, MaxBlobs: pipeline.MaxDefects, Grid: st.dark.Grid(),
		SNR: st.needed[pipeline.SNRPlane], Bands: bands}
}

// correctionFor returns the calibration made ready for frames like raw, from the second
// call on the same.
func (st *stage) correctionFor(raw raster.Raw) (*fused.Correction, error) {
	st.mu.Lock()
	defer st.mu.Unlock()
	if m := st.made; st.correction != nil && m.Format == raw.Format && m.Width == raw.Width && m.Height == raw.Height {
		return st.correction, nil
	}
	var p fused.Planes
	if c := st.calibration; c != nil {
		p = fused.Planes{Dark: c.Dark, Stray: c.Stray, Response: c.Response, Bad: badPixels(c, raw, float32(st.flat.MinResponse))}
	}
	c, err := fused.NewCorrection(raw.Format, raw.Width, raw.Height, p)
	if err != nil {
		return nil, err
	}
	st.correction, st.made, st.bad = c, raster.Raw{Format: raw.Format, Width: raw.Width, Height: raw.Height}, p.Bad
	return c, nil
}

// badPixels are those of the calibration, and those with less response than least.
func badPixels(c *pipeline.Calibration, raw raster.Raw, least float32) *raster.Mask {
	bad := raster.NewMask(raw.Width, raw.Height)
	if c.Response != nil && c.Response.Width == raw.Width && c.Response.Height == raw.Height {
		for y := range raw.Height {
			row := bad.Row(y)
			for x, r := range c.Response.Row(y) {
				row[x] = !(r >= least) // true for NaN too
			}
		}
	}
	for _, p := range c.BadPixels {
		if p.X >= 0 && p.Y >= 0 && p.X < raw.Width && p.Y < raw.Height {
			bad.Set(p.X, p.Y, true)
		}
	}
	return bad
}

// Run implements pipeline.Stage.
func (st *stage) Run(ctx context.Context, item *pipeline.Item) error {
	switch {
	case len(item.Frames) == 0:
		return pipeline.Invalid("view %q has no frame", item.View)
	case item.Region == nil:
		return pipeline.Invalid("view %q has no region; put the stage region earlier in the recipe", item.View)
	case item.Geometry == nil:
		return pipeline.Invalid("view %q has no geometry", item.View)
	}
	raw := item.Frames[0].Raw
	if width, height := item.Region.Size(); width != raw.Width || height != raw.Height {
		return pipeline.Invalid("region: got %d × %d px, the picture has %d × %d", width, height, raw.Width, raw.Height)
	}
	c, err := st.correctionFor(raw)
	if err != nil {
		return &pipeline.Error{Kind: pipeline.InvalidKind, Err: err}
	}
	bands := max(runtime.GOMAXPROCS(0)/int(st.working.Add(1)), 1)
	r, err := c.Find(raw, item.Region.Inside().Spans(), st.settings(bands))
	if err == nil && st.needed[pipeline.ContrastPlane] {
		err = st.contrast(item, c, r, bands)
	}
	st.working.Add(-1)
	if err != nil {
		return &pipeline.Error{Kind: pipeline.InvalidKind, Err: err}
	}
	st.fill(item, r)
	return ctx.Err()
}
