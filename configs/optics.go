package configs

import (
	"fmt"
	"math"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/limits"
)

// edgeStage is the stage that follows the part's edge.
const edgeStage = "edge"

// CheckOptics holds a recipe's limits against what its views resolve. The scale of a view is
// the recipe's or its calibration's; without either nothing is said of it. cals may be nil.
func CheckOptics(r *pipeline.Recipe, cals map[string]*pipeline.Calibration) []limits.Warning {
	j, ok := r.Judge.(*limits.Judge)
	if !ok {
		return nil
	}
	var views []limits.Optics
	for _, v := range r.Views {
		o := limits.Optics{View: v.Name, UMPerPx: v.UMPerPx, ShowsEdge: hasStage(v, edgeStage)}
		if c := cals[v.Name]; c != nil {
			if o.UMPerPx == 0 {
				o.UMPerPx = c.Scale.UMPerPx
			}
			if c.Sizing != nil {
				o.Sized, o.BlurUM = true, c.Sizing.BlurWidthPx*o.UMPerPx
			} else if c.PartEdge != nil {
				o.BlurUM = c.PartEdge.WidthPx * edgeToPoint * o.UMPerPx
			}
		}
		views = append(views, o)
	}
	return limits.CheckOptics(j.Specs(), views)
}

// edgeToPoint is the half-height width of a Gaussian over the 10–90 % width of its edge,
// 2√(2 ln 2) / 2.5631. Where the outline is a bright rim the edge is that of the rim, and
// the blur comes out too wide.
var edgeToPoint = 2 * math.Sqrt(2*math.Ln2) / 2.5631

func hasStage(v pipeline.RecipeView, typ string) bool {
	return slices.ContainsFunc(v.Stages, func(s pipeline.StageSpec) bool { return s.Type == typ })
}

// edges refuses limits that no view can serve.
func (c *recipeReader) edges(r *pipeline.Recipe) {
	if r.Judge == nil {
		return
	}
	for _, w := range CheckOptics(r, nil) {
		c.wrong(w.Refuse, index("limits", w.Limit), fmt.Sprintf("limit %q: %s", w.Name, w.Text), "")
	}
}
