package outside

import (
	"context"
	"math"
	"os"
	"strings"
	"sync"
	"testing"
	"time"

	"lapgate/pipeline"
)

func pipelineEnvironment() pipeline.Environment {
	return pipeline.Environment{View: "ring", Geometry: pipeline.Planar{UMPerPx: 10}}
}

// passAll accepts whatever is not held.
type passAll struct{}

func (passAll) Judge(pipeline.Evidence) (pipeline.Verdict, []pipeline.Reason) {
	return pipeline.Accept, nil
}

func (passAll) Canonical() []byte { return []byte("{}") }

// line returns a pipeline of the one stage.
func line(t *testing.T, f pipeline.Factory) *pipeline.Pipeline {
	t.Helper()
	cat, err := pipeline.NewCatalogue([]pipeline.Factory{f}, nil)
	if err != nil {
		t.Fatal(err)
	}
	r := &pipeline.Recipe{File: "disc.yaml", Judge: passAll{}, Views: []pipeline.RecipeView{
		{Name: "ring", Frames: 1, NoCalibration: true, NoProofs: true, UMPerPx: 10, Stages: []pipeline.StageSpec{{Type: f.Type}}}}}
	p, err := pipeline.Build(r, cat, pipeline.Options{})
	if err != nil {
		t.Fatal(err)
	}
	return p
}

// A stage that dies at every 50th unit: each unit gets one judgement, those at which it
// died are held with its name, all others are accepted with the right answer.
// LAPGATE_LONG=1 makes it 10 000 units.
func TestStageThatKeepsDying(t *testing.T) {
	t.Parallel()
	n := 600
	switch {
	case testing.Short():
		n = 200
	case os.Getenv("LAPGATE_LONG") != "":
		n = 10_000
	}
	s := settingsFor("hostile", "panic")
	s.RestartBudget, s.Backoff = n, time.Millisecond
	h := open(t, s)
	p := line(t, h.Factory())
	verdicts := make([]pipeline.Judgement, n)
	var wg sync.WaitGroup
	units := make(chan int)
	for range 2 {
		wg.Go(func() {
			for i := range units {
				verdicts[i] = inspectTiny(t, p, i)
			}
		})
	}
	for i := range n {
		units <- i
	}
	close(units)
	wg.Wait()
	for i, j := range verdicts {
		if (j.Verdict == pipeline.Hold) != (i%50 == 49) {
			t.Fatalf("unit %d: %s %+v", i, j.Verdict, j.Reasons)
		}
		if j.Verdict == pipeline.Hold && !strings.Contains(j.Reasons[0].Text, "stage probe: plug-in hostile panic: its process ended in mid-call") {
			t.Fatalf("unit %d: %+v", i, j.Reasons)
		}
	}
	eventually(t, "the last restart", func() bool { return h.Status().State == Up })
	if r := h.Status().Restarts; r < n/50 || r > 2*n/50 {
		t.Errorf("%d restarts for %d deaths, want one each, or two where another unit was under way", r, n/50)
	}
}

// inspectTiny inspects a unit of one tiny frame; every 50th makes the stage die.
func inspectTiny(t *testing.T, p *pipeline.Pipeline, i int) pipeline.Judgement {
	item := tiny(byte(i % 250))
	if i%50 == 49 {
		item = tiny(255)
	}
	e, j := p.Inspect(context.Background(), pipeline.Identity{}, []pipeline.View{{Name: "ring", Frames: item.Frames}}, time.Now())
	for _, m := range e.Views[0].Measurements {
		if m.Name == "sum" && math.Abs(m.Value-sumOf(item)) > 0 {
			t.Errorf("unit %d: sum %g, want %g", i, m.Value, sumOf(item))
		}
	}
	return j
}

// When the budget is spent the stage is down: it says so, and every unit is held.
func TestBudgetSpent(t *testing.T) {
	s := settingsFor("hostile", "panic")
	s.RestartBudget, s.Backoff = 2, time.Millisecond
	h := open(t, s)
	p := line(t, h.Factory())
	for i := range 3 {
		if j := inspectTiny(t, p, 49); j.Verdict != pipeline.Hold {
			t.Errorf("unit %d: %s", i, j.Verdict)
		}
	}
	eventually(t, "the stage is down", func() bool { return h.Status().State == Down })
	for i := range 20 {
		j := inspectTiny(t, p, i)
		if j.Verdict != pipeline.Hold || !strings.Contains(j.Reasons[0].Text, "the stage is down: its 2 restarts within 10m0s are spent") {
			t.Errorf("unit %d: %s %+v", i, j.Verdict, j.Reasons)
		}
	}
	if s := h.Status(); s.Restarts != 2 || !strings.Contains(s.LastError, "the lap is worn") {
		t.Errorf("got %+v", s)
	}
}
