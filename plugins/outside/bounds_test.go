package outside

import (
	"context"
	"fmt"
	"os"
	"slices"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"lapgate/pipeline"
)

// tellFactory is a stage that tells what its process may see: its surroundings in an error
// for a frame that starts with 1, and otherwise how many calls it has at once.
func tellFactory() pipeline.Factory {
	var now, most atomic.Int64
	return pipeline.Make(pipeline.Factory{Type: "tell", Version: "1", Scope: pipeline.ScopeView, Summary: "Tells what its process sees.",
		Reads: []string{pipeline.RawPlane}, Writes: []string{"measurements"}}, probeSettings{Factor: 1, Rules: []probeRule{{"dig", 3}}},
		func(probeSettings, pipeline.Environment) (pipeline.Stage, error) {
			return pipeline.StageFunc(func(_ context.Context, item *pipeline.Item) error {
				if item.Frames[0].Raw.Data[0] == 1 {
					dir, _ := os.Getwd()
					return pipeline.Invalid("folder %s, environment %q", dir, os.Environ())
				}
				n := now.Add(1)
				defer now.Add(-1)
				for m := most.Load(); n > m && !most.CompareAndSwap(m, n); m = most.Load() {
				}
				time.Sleep(20 * time.Millisecond)
				item.Measure("most_at_once", float64(most.Load()), "")
				return nil
			}), nil
		})
}

// A stage sees what its settings give it and nothing else of the server's environment, in a
// folder of its own that is gone afterwards.
func TestSurroundings(t *testing.T) {
	t.Setenv("LAPGATE_TEST_SECRET", "the combination of the safe")
	s := settingsFor("tell")
	s.Env = map[string]string{"GRIT": "0.5 um"}
	h := open(t, s)
	err := newStage(t, h.Factory(), "{}").Run(context.Background(), tiny(1))
	if err == nil {
		t.Fatal("no error")
	}
	text := err.Error()
	for _, want := range []string{`"GRIT=0.5 um"`, `"PATH=/usr/local/bin:/usr/bin:/bin"`, "/lapgate-outside-"} {
		if !strings.Contains(text, want) {
			t.Errorf("got %s\nwant %s", text, want)
		}
	}
	if strings.Contains(text, "SECRET") {
		t.Errorf("the server's environment is seen: %s", text)
	}
	folder := strings.TrimSuffix(strings.Fields(text[strings.Index(text, "folder "):])[1], ",")
	if _, err := os.Stat(folder); err != nil {
		t.Error(err)
	}
	h.Close()
	if _, err := os.Stat(folder); !os.IsNotExist(err) {
		t.Errorf("%s is still there: %v", folder, err)
	}
}

// No more calls than max_concurrent are under way at once; the others wait for their turn.
func TestCallsAtOnce(t *testing.T) {
	s := settingsFor("tell")
	s.MaxConcurrent = 2
	stage := newStage(t, open(t, s).Factory(), "{}")
	var wg sync.WaitGroup
	most := make([]float64, 10)
	for i := range most {
		wg.Go(func() {
			item := tiny(9)
			if err := stage.Run(context.Background(), item); err != nil {
				t.Error(err)
			}
			most[i], _ = item.Number("most_at_once")
		})
	}
	wg.Wait()
	if slices.Max(most) != 2 {
		t.Errorf("%g calls at once, want 2", slices.Max(most))
	}
}

// What a stage writes into its memory after it has answered changes nothing any more.
func TestLateWriter(t *testing.T) {
	stage := newStage(t, open(t, settingsFor("hostile", "late")).Factory(), "{}")
	item := tiny(255)
	if err := stage.Run(context.Background(), item); err != nil {
		t.Fatal(err)
	}
	pix := item.Planes["sum"].Pixels.Pix
	first := fmt.Sprint(pix)
	time.Sleep(150 * time.Millisecond)
	if again := fmt.Sprint(pix); first != "[0 0 0 0]" || again != first {
		t.Errorf("%s, then %s", first, again)
	}
}
