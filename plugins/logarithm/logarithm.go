// Package logarithm is the stage that takes corrected counts to their logarithm, so that
// what comes after measures contrast relative to the level around it. It corrects nothing
// and looks for no defect.
package logarithm

import (
	"context"
	"fmt"
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Settings of the stage.
type Settings struct {
	// ScaleDN is how many DN of the new scale a factor of e makes: of a small contrast, 1 %
	// becomes scale_dn/100.
	ScaleDN float64 `json:"scale_dn" yaml:"scale_dn"`
	// OffsetDN is added to the counts, so that dark ones keep a finite contrast. Below it the
	// scale is close to a straight line; about the noise of a dark pixel is right.
	OffsetDN float64 `json:"offset_dn" yaml:"offset_dn"`
}

// Default makes 1 % of contrast 2 DN and is straight below 2 DN.
var Default = Settings{ScaleDN: 200, OffsetDN: 2}

// Check implements pipeline.Checker.
func (s Settings) Check() error {
	switch {
	case !(s.ScaleDN >= 1 && s.ScaleDN <= 1e5):
		return fmt.Errorf("scale_dn: got %g, want 1 to 100000", s.ScaleDN)
	case !(s.OffsetDN >= 0.1 && s.OffsetDN <= 1e5):
		return fmt.Errorf("offset_dn: got %g, want 0.1 to 100000", s.OffsetDN)
	}
	return nil
}

// Factory describes the stage.
var Factory = pipeline.Make(pipeline.Factory{
	Type: "logarithm", Version: "1", Scope: pipeline.ScopeView,
	Summary: "Takes corrected counts to their logarithm: contrast is then relative to the level, whatever the exposure.",
	Reads:   []string{pipeline.CorrectedPlane},
	Writes:  []string{pipeline.CorrectedPlane},
}, Default, func(s Settings, _ pipeline.Environment) (pipeline.Stage, error) { return stage{s}, nil })

type stage struct{ s Settings }

// Run implements pipeline.Stage: v becomes scale·ln(1 + |v|/offset) with the sign of v, so
// that noise about 0 keeps both of its sides. Heights and fluxes of the defects found after
// it are on that scale.
func (st stage) Run(ctx context.Context, item *pipeline.Item) error {
	corrected, err := item.Plane(pipeline.CorrectedPlane)
	if err != nil {
		return err
	}
	out := raster.NewPlane(corrected.Width, corrected.Height)
	for y := range corrected.Height {
		dst := out.Row(y)
		for x, v := range corrected.Row(y) {
			w := float64(v)
			dst[x] = float32(math.Copysign(st.s.ScaleDN*math.Log1p(math.Abs(w)/st.s.OffsetDN), w))
		}
	}
	item.SetPlane(pipeline.CorrectedPlane, "DN", out)
	return ctx.Err()
}
