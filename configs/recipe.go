package configs

import (
	"errors"
	"fmt"
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/limits"
)

// recipeFile is a recipe as it is written.
type recipeFile struct {
	Part          string        // part number
	Revision      string        // of the drawing; may be empty
	Surface       string        // which face; may be empty
	Views         []viewFile    // at least one
	Unit          []settings    // stages of unit scope, in order
	Limits        []limits.Spec // at least one
	MaxAttempts   int           // showings of a unit's surface; 0 = no limit
	MinCoverage   *float64      // share of the region that must be inspected, 0 to 1; must be given
	ViewTimeoutMS int           // how long to wait for all views of a showing; 0 = the server's setting
	Masters       []masterFile  // units that must be found every shift; none = the station is not held to any
}

// viewFile is one view of a recipe as it is written.
type viewFile struct {
	Name        string
	Light       string
	Frames      int        // frames in the view; 0 is read as 1
	Calibration string     // "required" (also when empty) or "none"
	Proofs      string     // "required" (also when empty) or "none": nothing need be proven
	UMPerPx     float64    // stated scale; 0 = the calibration's
	RotationDeg float64    // of the part as this camera sees it
	Mirror      bool       // whether this camera sees the part mirrored
	Stages      []settings // in order; a type may appear twice
}

// DefaultMaxAttempts is how often a unit may be shown when the recipe does not say.
const DefaultMaxAttempts = 3

// LoadRecipe reads a recipe. With a catalogue, the stages' types and settings are checked
// too; without, only what any recipe must be. The error is Problems where the content is
// to blame.
func LoadRecipe(path string, catalogue *pipeline.Catalogue) (*pipeline.Recipe, error) {
	text, err := readFile(path)
	if err != nil {
		return nil, err
	}
	return DecodeRecipe(path, text, catalogue)
}

// DecodeRecipe is LoadRecipe for text that was read already.
func DecodeRecipe(file string, text []byte, catalogue *pipeline.Catalogue) (*pipeline.Recipe, error) {
	written, src, problems := decodeAll(file, text, recipeFile{MaxAttempts: DefaultMaxAttempts})
	c := &recipeReader{src: src, catalogue: catalogue, problems: problems}
	if problems != nil {
		c.stagesOnly(written)
		return nil, c.problems.err()
	}
	r := c.recipe(written)
	if err := c.problems.err(); err != nil {
		return nil, err
	}
	return r, nil
}

// recipeReader turns a recipeFile into a Recipe and collects what is wrong with it.
type recipeReader struct {
	src       Source
	catalogue *pipeline.Catalogue
	problems  Problems
}

func (c *recipeReader) wrong(bad bool, path, found, want string) {
	if bad {
		c.problems = append(c.problems, c.src.Problem(path, found, want))
	}
}

func (c *recipeReader) recipe(w recipeFile) *pipeline.Recipe {
	r := &pipeline.Recipe{Part: w.Part, Revision: w.Revision, Surface: w.Surface, Text: c.src.Text, TextHash: c.src.Hash, File: c.src.File,
		MaxAttempts: w.MaxAttempts, ViewTimeoutMS: w.ViewTimeoutMS}
	c.id("part", w.Part, true)
	c.id("revision", w.Revision, false)
	c.id("surface", w.Surface, false)
	c.wrong(w.MaxAttempts < 0 || w.MaxAttempts > 1000, "max_attempts", fmt.Sprintf("got %d", w.MaxAttempts), "0 to 1000; 0 = no limit")
	c.wrong(w.ViewTimeoutMS < 0 || w.ViewTimeoutMS > 3_600_000, "view_timeout_ms", fmt.Sprintf("got %d", w.ViewTimeoutMS), "0 to 3600000; 0 = the server's setting")
	c.wrong(len(w.Views) == 0, "views", "no view is given", "at least one")
	for i, v := range w.Views {
		r.Views = append(r.Views, c.view(v, index("views", i)))
		for _, earlier := range w.Views[:i] {
			c.wrong(earlier.Name == v.Name, index("views", i)+".name", fmt.Sprintf("%q names an earlier view too", v.Name), "a name of its own for every view")
		}
	}
	r.Unit = c.stages(w.Unit, "unit", pipeline.ScopeUnit)
	r.MinCoverage = c.coverage(w.MinCoverage)
	r.Judge = c.judge(w.Limits, r.MinCoverage)
	c.edges(r)
	r.Masters = c.masters(w)
	return r
}

// stagesOnly looks at the stages of a recipe that is faulty elsewhere, so that their
// mistakes are told in the same go. The rest would only repeat what is known.
func (c *recipeReader) stagesOnly(w recipeFile) {
	for i, v := range w.Views {
		c.stages(v.Stages, index("views", i)+".stages", pipeline.ScopeView)
	}
	c.stages(w.Unit, "unit", pipeline.ScopeUnit)
}

func (c *recipeReader) id(path, id string, required bool) {
	if id == "" && !required {
		return
	}
	c.wrong(pipeline.CheckID(path, id) != nil, path, fmt.Sprintf("got %q", id),
		fmt.Sprintf("1 to %d characters of A-Z a-z 0-9 . _ - and no leading dot", pipeline.MaxIDLength))
}

func (c *recipeReader) coverage(share *float64) float64 {
	if share == nil {
		c.wrong(true, "min_coverage", "the key is missing", "the share of the region that must be inspected, such as 0.95")
		return 0
	}
	c.wrong(*share < 0 || *share > 1, "min_coverage", fmt.Sprintf("got %g", *share), "a share from 0 to 1")
	return min(max(*share, 0), 1)
}

func (c *recipeReader) view(v viewFile, path string) pipeline.RecipeView {
	c.id(path+".name", v.Name, true)
	c.wrong(v.Frames < 0 || v.Frames > pipeline.MaxViewFrames, path+".frames", fmt.Sprintf("got %d", v.Frames),
		fmt.Sprintf("1 to %d", pipeline.MaxViewFrames))
	c.wrong(v.Calibration != "" && v.Calibration != "none" && v.Calibration != "required", path+".calibration",
		fmt.Sprintf("got %q", v.Calibration), "required or none")
	c.wrong(v.Proofs != "" && v.Proofs != "none" && v.Proofs != "required", path+".proofs", fmt.Sprintf("got %q", v.Proofs), "required or none")
	c.wrong(v.UMPerPx < 0 || v.UMPerPx > 1e5, path+".um_per_px", fmt.Sprintf("got %g", v.UMPerPx), "0 to 1e5 µm; 0 = the calibration's")
	c.wrong(v.Calibration == "none" && v.UMPerPx == 0, path+".um_per_px", "no scale is given and no calibration has one", "µm per pixel")
	c.wrong(math.Abs(v.RotationDeg) > 360, path+".rotation_deg", fmt.Sprintf("got %g", v.RotationDeg), "-360 to 360")
	c.wrong(len(v.Stages) == 0, path+".stages", "no stage is given", "at least one")
	return pipeline.RecipeView{Name: v.Name, Light: v.Light, Frames: max(v.Frames, 1), NoCalibration: v.Calibration == "none", NoProofs: v.Proofs == "none",
		UMPerPx: v.UMPerPx, RotationDeg: v.RotationDeg, Mirror: v.Mirror, Stages: c.stages(v.Stages, path+".stages", pipeline.ScopeView)}
}

func (c *recipeReader) judge(specs []limits.Spec, minCoverage float64) pipeline.Judge {
	if len(specs) == 0 {
		c.wrong(true, "limits", "no limit is given", "at least one: without a limit every unit would pass")
		return nil
	}
	j, err := limits.New(specs, minCoverage)
	var all limits.Mistakes
	switch {
	case errors.As(err, &all):
		for _, m := range all {
			c.problems = append(c.problems, c.src.Within(fmt.Sprintf("limits[%d].%s", m.Limit, m.Key), m.Line, m.Column, m.Message, ""))
		}
		return nil
	case err != nil:
		c.wrong(true, "limits", err.Error(), "")
		return nil
	}
	return j
}
