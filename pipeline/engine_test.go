package pipeline_test

import (
	"context"
	"encoding/json"
	"errors"
	"math"
	"slices"
	"strings"
	"testing"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// settings of the test stages.
type settings struct {
	Add float64 `yaml:"add"`
}

func (s settings) Check() error {
	if s.Add < 0 {
		return errors.New("add: got a negative number, want 0 or more")
	}
	return nil
}

// adder is a stage that finds s.Add defects.
func adder(typ string, reads ...string) pipeline.Factory {
	return pipeline.Make(pipeline.Factory{Type: typ, Version: "1", Scope: pipeline.ScopeView, Reads: reads}, settings{Add: 1},
		func(s settings, _ pipeline.Environment) (pipeline.Stage, error) {
			return pipeline.StageFunc(func(_ context.Context, it *pipeline.Item) error {
				out := append([]pipeline.Defect(nil), it.Defects...)
				for range int(s.Add) {
					out = append(out, pipeline.Defect{Kind: pipeline.Dig})
				}
				it.Defects = out
				it.Coverage.Share = 1
				return nil
			}), nil
		})
}

func failing(typ string, run pipeline.StageFunc) pipeline.Factory {
	return pipeline.Make(pipeline.Factory{Type: typ, Version: "1", Scope: pipeline.ScopeView}, settings{},
		func(settings, pipeline.Environment) (pipeline.Stage, error) { return run, nil })
}

// countJudge rejects when there are more defects than it allows.
type countJudge struct{ most int }

func (j countJudge) Judge(e pipeline.Evidence) (pipeline.Verdict, []pipeline.Reason) {
	if len(e.Defects) > j.most {
		return pipeline.Reject, []pipeline.Reason{{Name: "count", Verdict: pipeline.Reject}}
	}
	return pipeline.Accept, nil
}
func (j countJudge) Canonical() []byte { return []byte(`{"most":1}`) }

func recipe(stages ...string) *pipeline.Recipe {
	v := pipeline.RecipeView{Name: "ring", Frames: 1, NoCalibration: true, NoProofs: true, UMPerPx: 10}
	for _, s := range stages {
		v.Stages = append(v.Stages, pipeline.StageSpec{Type: s})
	}
	return &pipeline.Recipe{Part: "disc", File: "disc.yaml", Views: []pipeline.RecipeView{v}, Judge: countJudge{most: 1}}
}

func catalogue(t *testing.T, fusers []pipeline.Fuser, f ...pipeline.Factory) *pipeline.Catalogue {
	t.Helper()
	c, err := pipeline.NewCatalogue(f, fusers)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

func build(t *testing.T, r *pipeline.Recipe, c *pipeline.Catalogue) *pipeline.Pipeline {
	t.Helper()
	p, err := pipeline.Build(r, c, pipeline.Options{})
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func identity() pipeline.Identity {
	return pipeline.Identity{Part: "disc", Unit: "u1", Line: "A", Station: "s1", Attempt: 1, Purpose: pipeline.Production}
}

func frame(t *testing.T, view string) pipeline.View {
	t.Helper()
	raw := raster.NewRaw(raster.Mono8, 4, 3)
	h := pipeline.FrameHeader{Identity: identity(), View: view, Count: 1, Stride: raw.Stride, Captured: time.Unix(1, 0), CRC32C: pipeline.Checksum(raw.Data),
		Capture: pipeline.Capture{Format: raw.Format, Width: 4, Height: 3}}
	f, err := pipeline.NewFrame(h, raw.Data)
	if err != nil {
		t.Fatal(err)
	}
	return pipeline.View{Name: view, Frames: []pipeline.Frame{f}}
}

func inspect(t *testing.T, p *pipeline.Pipeline) (pipeline.Evidence, pipeline.Judgement) {
	t.Helper()
	return p.Inspect(context.Background(), identity(), []pipeline.View{frame(t, "ring")}, time.Unix(2, 0))
}

func TestInspectNumbersAndJudges(t *testing.T) {
	p := build(t, recipe("adder", "adder"), catalogue(t, nil, adder("adder")))
	e, j := inspect(t, p)
	if len(e.Defects) != 2 || e.Defects[1].ID != 2 || e.Defects[1].View != "ring" {
		t.Errorf("defects %+v, want two of view ring with ids 1 and 2", e.Defects)
	}
	if j.Verdict != pipeline.Reject || j.By != pipeline.ByLine || j.DetectionHash != p.DetectionHash {
		t.Errorf("judgement %+v, want a reject by the line with the pipeline's hashes", j)
	}
}

// The first law: whatever keeps a view from being inspected is a hold, never an accept.
func TestNothingUninspectedIsAccepted(t *testing.T) {
	ok := adder("adder")
	cases := map[string]pipeline.Factory{
		"error": failing("bad", func(context.Context, *pipeline.Item) error { return errors.New("lamp driver gone") }),
		"panic": failing("bad", func(context.Context, *pipeline.Item) error { panic("index out of range") }),
		"nan": failing("bad", func(_ context.Context, it *pipeline.Item) error {
			it.Defects = []pipeline.Defect{{DiameterUM: math.NaN()}}
			return nil
		}),
		"proof": failing("bad", func(_ context.Context, it *pipeline.Item) error {
			it.Prove(pipeline.Proof{Name: "part", Reason: "no circle found"})
			return nil
		}),
		"truncated": failing("bad", func(_ context.Context, it *pipeline.Item) error { it.Truncated = true; return nil }),
	}
	for name, bad := range cases {
		t.Run(name, func(t *testing.T) {
			p := build(t, recipe("adder", "bad"), catalogue(t, nil, ok, bad))
			e, j := inspect(t, p)
			if j.Verdict != pipeline.Hold || len(j.Reasons) == 0 {
				t.Errorf("judgement %+v of evidence %+v, want a hold with a reason", j, e)
			}
			if _, err := json.Marshal(e); err != nil {
				t.Errorf("evidence that cannot be recorded: %v", err)
			}
		})
	}
}

func TestMissingViewIsHeld(t *testing.T) {
	p := build(t, recipe("adder"), catalogue(t, nil, adder("adder")))
	_, j := p.Inspect(context.Background(), identity(), nil, time.Unix(2, 0))
	if j.Verdict != pipeline.Hold || j.Reasons[0].Name != pipeline.ReasonMissingView {
		t.Errorf("judgement %+v, want a hold for %q", j, pipeline.ReasonMissingView)
	}
}

func TestLowCoverageIsHeld(t *testing.T) {
	r := recipe("low")
	r.MinCoverage = 0.99
	low := failing("low", func(_ context.Context, it *pipeline.Item) error { it.Coverage.Share = 0.98; return nil })
	_, j := inspect(t, build(t, r, catalogue(t, nil, low)))
	if j.Verdict != pipeline.Hold || j.Reasons[0].Name != pipeline.ReasonCoverage {
		t.Errorf("judgement %+v, want a hold for coverage", j)
	}
}

func TestCalibrationOfOtherSettingsIsHeld(t *testing.T) {
	r := recipe("adder")
	r.Views[0].NoCalibration = false
	cal := &pipeline.Calibration{Hash: "sha256:1", Capture: pipeline.Capture{Format: raster.Mono8, Width: 4, Height: 3, ExposureUS: 500}}
	p, err := pipeline.Build(r, catalogue(t, nil, adder("adder")), pipeline.Options{Calibrations: map[string]*pipeline.Calibration{"ring": cal}})
	if err != nil {
		t.Fatal(err)
	}
	e, j := inspect(t, p)
	if j.Verdict != pipeline.Hold || !strings.Contains(j.Reasons[0].Text, "exposure_us: got 0, want 500") {
		t.Errorf("reasons %+v, want a hold that names exposure_us, found and wanted", j.Reasons)
	}
	if len(e.Defects) != 0 {
		t.Errorf("%d defects of a view that could not be inspected", len(e.Defects))
	}
}

func TestHashes(t *testing.T) {
	c := catalogue(t, nil, adder("adder"), adder("other"))
	base := build(t, recipe("adder"), c)
	other := build(t, recipe("other"), c)
	limits := recipe("adder")
	limits.MinCoverage = 0.5
	moved := build(t, limits, c)
	if base.DetectionHash == other.DetectionHash {
		t.Error("two different rows of stages have one detection hash")
	}
	if base.DetectionHash != moved.DetectionHash || base.JudgingHash == moved.JudgingHash {
		t.Error("a change of the judging part must keep the detection hash and change the judging hash")
	}
}

func TestBuildSaysWhatIsWrong(t *testing.T) {
	c := catalogue(t, nil, adder("adder"))
	cases := []struct {
		name, want string
		change     func(*pipeline.Recipe)
	}{
		{"unknown stage", `no stage type "addr" (have adder)`, func(r *pipeline.Recipe) { r.Views[0].Stages[0].Type = "addr" }},
		{"bad setting", "add: got a negative number", func(r *pipeline.Recipe) {
			r.Views[0].Stages[0].Decode = func(dst any) error { dst.(*settings).Add = -1; return nil }
		}},
		{"no scale", "no scale", func(r *pipeline.Recipe) { r.Views[0].UMPerPx = 0 }},
		{"no calibration", "calibration: none", func(r *pipeline.Recipe) { r.Views[0].NoCalibration = false }},
		{"no limits", "no limits", func(r *pipeline.Recipe) { r.Judge = nil }},
		{"view stage on unit", "works on one view", func(r *pipeline.Recipe) { r.Unit = r.Views[0].Stages }},
	}
	for _, tc := range cases {
		r := recipe("adder")
		tc.change(r)
		if _, err := pipeline.Build(r, c, pipeline.Options{}); err == nil || !strings.Contains(err.Error(), tc.want) {
			t.Errorf("%s: error %v, want %q in it", tc.name, err, tc.want)
		}
	}
}

func TestTwoFactoriesOfOneType(t *testing.T) {
	if _, err := pipeline.NewCatalogue([]pipeline.Factory{adder("a"), adder("a")}, nil); err == nil {
		t.Error("no error for two factories of one type")
	}
}

// A fuser replaces its row, unless a later stage reads a plane that it cannot write.
func TestFusing(t *testing.T) {
	var needed map[string]bool
	fuser := pipeline.Fuser{Name: "both", Types: []string{"a", "b"}, Unfusable: []string{pipeline.CorrectedPlane},
		New: func(s []any, _ pipeline.Environment, n map[string]bool) (pipeline.Stage, error) {
			needed = n
			return pipeline.StageFunc(func(_ context.Context, it *pipeline.Item) error {
				it.Coverage.Share = 1
				it.Defects = make([]pipeline.Defect, 7)
				return nil
			}), nil
		}}
	c := catalogue(t, []pipeline.Fuser{fuser}, adder("a"), adder("b"), adder("snr", pipeline.SNRPlane), adder("corrected", pipeline.CorrectedPlane))
	if e, _ := inspect(t, build(t, recipe("a", "b", "snr"), c)); len(e.Defects) != 8 || !needed[pipeline.SNRPlane] {
		t.Errorf("%d defects, planes needed %v; want the fused row's 7 and 1, and the snr plane asked for", len(e.Defects), needed)
	}
	if e, _ := inspect(t, build(t, recipe("a", "b", "corrected"), c)); len(e.Defects) != 3 {
		t.Errorf("%d defects, want 3: a reader of the corrected plane keeps the row apart", len(e.Defects))
	}
	if build(t, recipe("a", "b"), c).DetectionHash == build(t, recipe("b", "a"), c).DetectionHash {
		t.Error("the order of stages must show in the detection hash")
	}
}

// A view whose recipe does not say that nothing need be proven is held unless light,
// part and live data are.
func TestViewThatProvesNothingIsHeld(t *testing.T) {
	proves := pipeline.RequiredProofs()
	prove := failing("prove", func(_ context.Context, i *pipeline.Item) error {
		i.Coverage.Share = 1
		for _, name := range proves {
			i.Prove(pipeline.Proof{Name: name, OK: true})
		}
		return nil
	})
	r := recipe("prove")
	r.Views[0].NoProofs = false
	p := build(t, r, catalogue(t, nil, prove))
	if _, j := inspect(t, p); j.Verdict != pipeline.Accept {
		t.Errorf("all proven: got %+v", j)
	}
	for i, name := range pipeline.RequiredProofs() {
		proves = slices.Delete(pipeline.RequiredProofs(), i, i+1)
		_, j := inspect(t, p)
		if j.Verdict != pipeline.Hold || len(j.Reasons) != 1 || j.Reasons[0].Name != "not proven: "+name {
			t.Errorf("without %s: got %+v", name, j)
		}
	}
}
