package merge

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"slices"

	"lapgate/pipeline"
)

// Settings of the stage.
type Settings struct {
	// ToleranceUM is how far, in µm, the same defect may lie apart in two views because
	// of the views' registration. 0 = only defects that overlap by their own extent.
	ToleranceUM float64 `json:"tolerance_um" yaml:"tolerance_um"`
	// SizeRatio is how many times larger than the other one of two short defects may
	// look and still be the same. It is 1 or more; there is no value that switches it off.
	SizeRatio float64 `json:"size_ratio" yaml:"size_ratio"`
}

// Default is what the stage does when the file says nothing.
var Default = Settings{ToleranceUM: 50, SizeRatio: 3}

// Check implements pipeline.Checker.
func (s Settings) Check() error {
	if !(s.ToleranceUM >= 0 && s.ToleranceUM <= 1e6) {
		return fmt.Errorf("tolerance_um: got %v, want 0 to 1e6", s.ToleranceUM)
	}
	if !(s.SizeRatio >= 1 && s.SizeRatio <= 1000) {
		return fmt.Errorf("size_ratio: got %v, want 1 to 1000", s.SizeRatio)
	}
	return nil
}

// Factory describes the stage.
func Factory() pipeline.Factory {
	return pipeline.Make(pipeline.Factory{
		Type: "merge", Version: "1", Scope: pipeline.ScopeUnit,
		Summary: "Joins the defects that several views saw of the same imperfection, by place on the part.",
		Reads:   []string{"defects"}, Writes: []string{"defects"},
	}, Default, func(s Settings, _ pipeline.Environment) (pipeline.Stage, error) { return New(s), nil })
}

// New returns the stage.
func New(s Settings) pipeline.Stage {
	return pipeline.StageFunc(func(ctx context.Context, unit *pipeline.Item) error {
		var all []seen
		for _, v := range unit.Views {
			for _, d := range v.Defects {
				all = append(all, see(d, v))
			}
		}
		slices.SortFunc(all, compareSeen)
		groups, err := s.group(ctx, all)
		if err != nil {
			return err
		}
		out := make([]pipeline.Defect, 0, len(groups))
		for _, g := range groups {
			out = append(out, g.defect())
		}
		slices.SortFunc(out, compareDefects)
		for i := range out {
			out[i].ID = i + 1
		}
		unit.Defects = out
		return nil
	})
}

// compareSeen orders defects by what they are, not by where they stand in a list.
func compareSeen(a, b seen) int {
	return cmp.Or(cmp.Compare(a.View, b.View), cmp.Compare(a.ID, b.ID), cmp.Compare(a.UUM, b.UUM), cmp.Compare(a.VUM, b.VUM))
}

// compareDefects puts the clearest defect first.
func compareDefects(a, b pipeline.Defect) int {
	return cmp.Or(cmp.Compare(b.SNR, a.SNR), cmp.Compare(b.AreaUM2, a.AreaUM2),
		cmp.Compare(a.UUM, b.UUM), cmp.Compare(a.VUM, b.VUM), cmp.Compare(a.View, b.View), cmp.Compare(a.MergedFrom[0].ID, b.MergedFrom[0].ID))
}

// same returns how far apart two defects of different views are, and whether they are
// the same by the rules of the package's introduction.
func (s Settings) same(a, b *seen) (float64, bool) {
	if a.View == b.View || a.Kind.Scatters() != b.Kind.Scatters() || a.apart(b) > s.ToleranceUM {
		return 0, false
	}
	if !a.long() && !b.long() {
		d := math.Hypot(a.UUM-b.UUM, a.VUM-b.VUM)
		small, large := min(a.radius, b.radius), max(a.radius, b.radius)
		return d, d <= s.ToleranceUM+small && large <= s.SizeRatio*small+s.ToleranceUM
	}
	part, whole := a, b
	if part.length() > whole.length() || !whole.long() {
		part, whole = b, a
	}
	d := part.outside(whole)
	return d, d <= s.ToleranceUM
}
