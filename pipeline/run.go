package pipeline

import (
	"context"
	"fmt"
	"math"
	"runtime/debug"
	"strings"
	"time"
)

// ViewResult is one view after its stages.
type ViewResult struct {
	Item         *Item
	Milliseconds map[string]float64
	Failure      *Failure // nil = all stages ran
}

// RunView runs the stages of one view. It never returns an error: what went wrong is
// the result's Failure, and a Failure is a hold.
func (p *Pipeline) RunView(ctx context.Context, id Identity, view View) ViewResult {
	res := ViewResult{Item: &Item{Identity: id, View: view.Name, Frames: view.Frames}, Milliseconds: map[string]float64{}}
	line, ok := p.views[view.Name]
	if !ok {
		res.Failure = &Failure{Reason: ReasonBadFrame, View: view.Name,
			Detail: fmt.Sprintf("the recipe has no view %q (has %s)", view.Name, strings.Join(p.Views(), ", "))}
		return res
	}
	res.Item.Calibration, res.Item.Geometry = line.calibration, line.geometry
	if !proveSettings(res.Item) {
		return res
	}
	for _, b := range line.stages {
		if f := runStage(ctx, b, res.Item, res.Milliseconds); f != nil {
			f.View, res.Failure = view.Name, f
			return res
		}
	}
	demandProofs(line.spec, res.Item)
	numberDefects(res.Item)
	return res
}

// proveSettings holds the frames against the calibration; a mismatch is a failed
// proof and no stage runs.
func proveSettings(item *Item) bool {
	if item.Calibration == nil {
		return true
	}
	for _, f := range item.Frames {
		if err := item.Calibration.Match(f.Header); err != nil {
			item.Prove(Proof{Name: ProofSettings, OK: false, Reason: err.Error()})
			return false
		}
	}
	item.Prove(Proof{Name: ProofSettings, OK: true})
	return true
}

func runStage(ctx context.Context, b built, item *Item, ms map[string]float64) (f *Failure) {
	start := time.Now()
	defer func() {
		ms[b.factory.Type] += float64(time.Since(start).Microseconds()) / 1000
		if r := recover(); r != nil {
			f = &Failure{Reason: ReasonStageFailed, Stage: b.factory.Type, Detail: fmt.Sprintf("panic: %v\n%s", r, firstLines(debug.Stack(), 24))}
		}
	}()
	if err := ctx.Err(); err != nil {
		return &Failure{Reason: ReasonStageFailed, Stage: b.factory.Type, Detail: "not started: " + err.Error()}
	}
	if err := b.stage.Run(ctx, item); err != nil {
		return &Failure{Reason: ReasonStageFailed, Stage: b.factory.Type, Detail: err.Error()}
	}
	return finiteFailure(b.factory.Type, item)
}

func firstLines(b []byte, n int) string {
	lines := strings.SplitN(string(b), "\n", n+1)
	return strings.Join(lines[:min(n, len(lines))], "\n")
}

// finiteFailure refuses numbers that are not numbers: they would compare as within
// every limit, and could not be recorded. What the view has is then thrown away.
func finiteFailure(stage string, item *Item) *Failure {
	f := notFinite(stage, item)
	if f != nil {
		item.Defects, item.Measurements, item.Proofs, item.Coverage, item.CoverageMap = nil, nil, nil, Coverage{}, nil
	}
	return f
}

func notFinite(stage string, item *Item) *Failure {
	for _, d := range item.Defects {
		if !finite(d.XPx, d.YPx, d.UUM, d.VUM, d.AreaUM2, d.LengthUM, d.WidthUM, d.DiameterUM, d.DiameterFluxUM, d.DiameterFluxUncertaintyUM, d.SlopeMrad, d.Flux, d.PeakDN, d.PeakSigma, d.SNR, d.AngleDeg, d.EdgeDistanceUM) {
			return &Failure{Reason: ReasonStageFailed, Stage: stage, Detail: fmt.Sprintf("defect at (%.1f, %.1f) px has a measure that is no number", d.XPx, d.YPx)}
		}
	}
	for _, m := range item.Measurements {
		if !finite(m.Value) {
			return &Failure{Reason: ReasonStageFailed, Stage: stage, Detail: fmt.Sprintf("measurement %s is no number", m.Name)}
		}
	}
	for _, p := range item.Proofs {
		if !finite(p.Value, p.Low, p.High, p.WarnLow, p.WarnHigh) {
			return &Failure{Reason: ReasonStageFailed, Stage: stage, Detail: fmt.Sprintf("proof %s holds a value that is no number", p.Name)}
		}
	}
	if m := item.CoverageMap; m != nil && !finite(m.NoisyShare, m.UnseenShare, m.SaturatedShare) {
		return &Failure{Reason: ReasonStageFailed, Stage: stage, Detail: "the coverage map holds a value that is no number"}
	}
	if c := item.Coverage; !finite(c.Share, c.Background, c.Noise) {
		return &Failure{Reason: ReasonStageFailed, Stage: stage, Detail: "the coverage holds a value that is no number"}
	}
	return nil
}

func finite(values ...float64) bool {
	for _, v := range values {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return false
		}
	}
	return true
}

// numberDefects gives ids from 1 and cuts the list at MaxDefects.
func numberDefects(item *Item) {
	defects := item.Defects
	if len(defects) > MaxDefects {
		defects, item.Truncated = defects[:MaxDefects], true
	}
	out := make([]Defect, len(defects))
	for i, d := range defects {
		d.ID, d.View = i+1, item.View
		out[i] = d
	}
	item.Defects = out
}
