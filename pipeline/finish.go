package pipeline

import (
	"context"
	"slices"
	"sort"
	"time"
)

// SaturatedShare is the share of the region's pixels above which saturation is no
// longer a matter of single defects and the unit is held.
const SaturatedShare = 0.001

// Finish runs the unit's stages over the finished views and judges the evidence.
// Views that the recipe wants and that are not among the results are failures, as are
// those given.
func (p *Pipeline) Finish(ctx context.Context, id Identity, results []ViewResult, failures []Failure, now time.Time) (Evidence, Judgement) {
	results = slices.Clone(results)
	sort.SliceStable(results, func(a, b int) bool { return p.order(results[a]) < p.order(results[b]) })
	e := Evidence{Failures: append(slices.Clone(failures), p.missing(results, failures)...)}
	unit := &Item{Identity: id, Geometry: nil}
	for _, r := range results {
		if r.Failure != nil {
			e.Failures = append(e.Failures, *r.Failure)
		}
		e.Views = append(e.Views, viewEvidence(r))
		unit.Views = append(unit.Views, r.Item)
	}
	p.runUnit(ctx, unit, &e)
	e.Defects, e.Measurements = unit.Defects, unit.Measurements
	summarise(&e, unit)
	return e, p.judge(e, now)
}

func (p *Pipeline) order(r ViewResult) int { return slices.Index(p.Views(), r.Item.View) }

func (p *Pipeline) missing(results []ViewResult, failures []Failure) []Failure {
	var out []Failure
	for _, name := range p.Views() {
		have := slices.ContainsFunc(results, func(r ViewResult) bool { return r.Item.View == name })
		told := slices.ContainsFunc(failures, func(f Failure) bool { return f.View == name })
		if !have && !told {
			out = append(out, Failure{Reason: ReasonMissingView, View: name, Detail: "no frame of this view came"})
		}
	}
	return out
}

// runUnit runs the unit's stages over the defects of all views: a merge replaces them,
// a recipe without one keeps them.
func (p *Pipeline) runUnit(ctx context.Context, unit *Item, e *Evidence) {
	for _, v := range unit.Views {
		unit.Defects = append(unit.Defects, v.Defects...)
	}
	ms := map[string]float64{}
	for _, b := range p.unit {
		if f := runStage(ctx, b, unit, ms); f != nil {
			e.Failures = append(e.Failures, *f)
			break
		}
	}
	renumber(unit)
}

// renumber gives the unit's defects ids from 1 and keeps their views.
func renumber(unit *Item) {
	out := slices.Clone(unit.Defects)
	if len(out) > MaxDefects {
		out, unit.Truncated = out[:MaxDefects], true
	}
	for i := range out {
		out[i].ID = i + 1
	}
	unit.Defects = out
}

func viewEvidence(r ViewResult) ViewEvidence {
	it := r.Item
	v := ViewEvidence{Name: it.View, Coverage: it.Coverage, CoverageMap: it.CoverageMap, Proofs: it.Proofs, Measurements: it.Measurements,
		Defects: it.Defects, Truncated: it.Truncated, Milliseconds: r.Milliseconds}
	for _, f := range it.Frames {
		v.Frames = append(v.Frames, FrameEvidence{Header: f.Header})
	}
	if it.Calibration != nil {
		v.Calibration = it.Calibration.Hash
	}
	if it.Geometry != nil {
		x, y := 0.0, 0.0
		if it.Region != nil {
			x, y = it.Region.CentreX, it.Region.CentreY
		}
		_, _, v.UMPerPx = it.Geometry.ToStation(x, y)
	}
	if it.Region != nil {
		v.Region = regionEvidence(it.Region)
	}
	return v
}

func regionEvidence(r *Region) RegionEvidence {
	out := RegionEvidence{CentreX: r.CentreX, CentreY: r.CentreY, RadiusPx: r.RadiusPx}
	for _, z := range r.Zones {
		out.Zones = append(out.Zones, ZoneEvidence{Name: z.Name, AreaMM2: z.AreaMM2, EquivalentDiameterMM: z.EquivalentDiameterMM,
			OuterDiameterMM: z.OuterDiameterMM, InnerDiameterMM: z.InnerDiameterMM})
	}
	return out
}

func summarise(e *Evidence, unit *Item) {
	e.Coverage = 1
	e.Truncated = unit.Truncated
	for _, v := range unit.Views {
		e.Coverage = min(e.Coverage, v.Coverage.Share)
		e.Truncated = e.Truncated || v.Truncated
		if v.Region != nil && float64(v.Coverage.SaturatedPx) > SaturatedShare*float64(v.Region.Inside().Count()) {
			e.Saturated = true
		}
	}
	if len(unit.Views) == 0 {
		e.Coverage = 0
	}
}

func (p *Pipeline) judge(e Evidence, now time.Time) Judgement {
	verdict, reasons := p.Recipe.Verdict(e)
	return p.Stamp(Judgement{Verdict: verdict, Reasons: reasons, By: ByLine, At: now})
}

// Stamp writes the recipe's hashes and the versions into a judgement.
func (p *Pipeline) Stamp(j Judgement) Judgement {
	j.Recipe, j.DetectionHash, j.JudgingHash = p.Recipe.TextHash, p.DetectionHash, p.JudgingHash
	j.ProgramVersion, j.StageVersions = p.ProgramVersion, p.StageVersions
	return j
}

// Inspect runs all views of a showing one after the other and judges the unit.
func (p *Pipeline) Inspect(ctx context.Context, id Identity, views []View, now time.Time) (Evidence, Judgement) {
	e, j, _ := p.InspectKeeping(ctx, id, views, now)
	return e, j
}

// InspectKeeping is Inspect that also returns the finished views with their planes.
func (p *Pipeline) InspectKeeping(ctx context.Context, id Identity, views []View, now time.Time) (Evidence, Judgement, []ViewResult) {
	var results []ViewResult
	for _, v := range views {
		results = append(results, p.RunView(ctx, id, v))
	}
	e, j := p.Finish(ctx, id, results, nil, now)
	return e, j, results
}
