package pipeline

import (
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"fmt"
	"io"
	"maps"
)

// Options are what a recipe is built with beside its text.
type Options struct {
	Calibrations   map[string]*Calibration // by view
	ReadFile       func(name string) ([]byte, error)
	ProgramVersion string
	Unfused        bool // run every stage by itself, for comparison
	// Earlier returns the headers of the latest frames of a view that the station showed
	// before, oldest first; nil = nothing is on record.
	Earlier func(view string, most int) ([]FrameHeader, error)
}

// Pipeline is a recipe ready to run. It is safe for concurrent use.
type Pipeline struct {
	Recipe         *Recipe
	DetectionHash  string // equal hashes: detection can be shared
	JudgingHash    string
	StageVersions  map[string]string
	ProgramVersion string
	views          map[string]*viewLine
	unit           []built
}

// viewLine is the stages of one view in the order they run.
type viewLine struct {
	spec        RecipeView
	calibration *Calibration
	geometry    Geometry
	stages      []built
}

type built struct {
	factory  Factory
	settings any
	stage    Stage
}

// Build makes every stage of a recipe. Errors name the place in the recipe.
func Build(r *Recipe, cat *Catalogue, opt Options) (*Pipeline, error) {
	p := &Pipeline{Recipe: r, views: map[string]*viewLine{}, StageVersions: map[string]string{}, ProgramVersion: opt.ProgramVersion}
	if r.Judge == nil {
		return nil, Invalid("%s: the recipe has no limits; want at least one", r.File)
	}
	if len(r.Views) == 0 {
		return nil, Invalid("%s: the recipe has no view; want at least one", r.File)
	}
	detection := []any{}
	for _, v := range r.Views {
		line, form, err := p.buildView(v, cat, opt)
		if err != nil {
			return nil, err
		}
		p.views[v.Name] = line
		detection = append(detection, form)
	}
	unit, form, err := p.buildStages(r.Unit, ScopeUnit, cat, Environment{ReadFile: opt.ReadFile})
	if err != nil {
		return nil, err
	}
	p.unit = unit
	p.DetectionHash = hashOf(append(detection, form))
	p.JudgingHash = hashOf([]any{json.RawMessage(r.Judge.Canonical()), r.MinCoverage})
	return p, nil
}

func hashOf(form []any) string {
	sum := sha256.Sum256(canonical(form))
	return "sha256:" + hex.EncodeToString(sum[:])
}

func (p *Pipeline) buildView(v RecipeView, cat *Catalogue, opt Options) (*viewLine, any, error) {
	cal, err := calibrationFor(v, opt)
	if err != nil {
		return nil, nil, err
	}
	geometry, err := geometryFor(v, cal)
	if err != nil {
		return nil, nil, err
	}
	hash := ""
	if cal != nil {
		hash = cal.Hash
	}
	env := Environment{View: v.Name, Calibration: cal, Calibrations: opt.Calibrations, Geometry: geometry, ReadFile: opt.ReadFile}
	if opt.Earlier != nil {
		env.Earlier = func(most int) ([]FrameHeader, error) { return opt.Earlier(v.Name, most) }
	}
	stages, form, err := p.buildStages(v.Stages, ScopeView, cat, env)
	if err != nil {
		return nil, nil, fmt.Errorf("view %q: %w", v.Name, err)
	}
	if !opt.Unfused {
		if stages, err = fuse(stages, cat.fusers, env); err != nil {
			return nil, nil, fmt.Errorf("view %q: %w", v.Name, err)
		}
	}
	return &viewLine{spec: v, calibration: cal, geometry: geometry, stages: stages},
		[]any{v.Name, v.Frames, geometry, hash, v.NoProofs, form}, nil
}

// geometryFor takes the scale of the recipe, or else the calibration's, and the
// calibration's distortion.
func geometryFor(v RecipeView, cal *Calibration) (Geometry, error) {
	g := Planar{UMPerPx: v.UMPerPx, RotationDeg: v.RotationDeg, Mirror: v.Mirror}
	if cal != nil && g.UMPerPx == 0 {
		g.UMPerPx = cal.Scale.UMPerPx
	}
	if !(g.UMPerPx > 0) {
		return nil, Invalid("view %q: no scale; give um_per_px in the recipe or a calibration with one", v.Name)
	}
	if cal != nil && cal.Distortion != nil {
		return Distorted{Planar: g, Lens: *cal.Distortion}, nil
	}
	return g, nil
}

func calibrationFor(v RecipeView, opt Options) (*Calibration, error) {
	cal := opt.Calibrations[v.Name]
	switch {
	case v.NoCalibration && cal != nil:
		return nil, Invalid("view %q: the recipe states calibration: none, but one was given; take away one of the two", v.Name)
	case !v.NoCalibration && cal == nil:
		return nil, Invalid("view %q: no calibration; make one with `lapgated calibrate`, or state calibration: none in the recipe", v.Name)
	}
	return cal, nil
}

func (p *Pipeline) buildStages(specs []StageSpec, scope Scope, cat *Catalogue, env Environment) ([]built, any, error) {
	var out []built
	form := []any{}
	for i, s := range specs {
		f, err := cat.Factory(s.Type)
		if err != nil {
			return nil, nil, fmt.Errorf("%sstages[%d]: %w", prefix(s.Where), i, err)
		}
		if f.Scope != "" && f.Scope != scope { // "" = a stage that has not started yet
			return nil, nil, Invalid("%sstages[%d]: stage %q works on one %s; move it there", prefix(s.Where), i, s.Type, f.Scope)
		}
		stage, settings, err := f.New(s.Decode, env)
		if err != nil {
			return nil, nil, fmt.Errorf("%sstages[%d] (%s): %w", prefix(s.Where), i, s.Type, err)
		}
		out = append(out, built{f, settings, stage})
		form = append(form, []any{f.Type, f.Version, settings})
		p.StageVersions[f.Type] = f.Version
	}
	return out, form, nil
}

func prefix(where string) string {
	if where == "" {
		return ""
	}
	return where + ": "
}

// Views returns the names of the views in the recipe's order.
func (p *Pipeline) Views() []string {
	var out []string
	for _, v := range p.Recipe.Views {
		out = append(out, v.Name)
	}
	return out
}

// Calibrations returns the calibration of each view that has one.
func (p *Pipeline) Calibrations() map[string]*Calibration {
	out := map[string]*Calibration{}
	for name, v := range p.views {
		if v.calibration != nil {
			out[name] = v.calibration
		}
	}
	return maps.Clone(out)
}

// Frames returns how many frames the named view has, and whether there is such a view.
func (p *Pipeline) Frames(view string) (int, bool) {
	v, ok := p.views[view]
	if !ok {
		return 0, false
	}
	return max(v.spec.Frames, 1), true
}

// Close closes every stage that holds something.
func (p *Pipeline) Close() error {
	var first error
	for _, v := range p.views {
		first = closeAll(v.stages, first)
	}
	return closeAll(p.unit, first)
}

func closeAll(stages []built, first error) error {
	for i := len(stages) - 1; i >= 0; i-- {
		if c, ok := stages[i].stage.(io.Closer); ok {
			if err := c.Close(); err != nil && first == nil {
				first = err
			}
		}
	}
	return first
}
