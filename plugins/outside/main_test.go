package outside

import (
	"context"
	"fmt"
	"io"
	"log/slog"
	"os"
	"strings"
	"testing"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/plugins/builtin"
	"lapgate/plugins/deflectometry"
	"lapgate/plugins/unwrap"
)

// TestMain runs this test program as a plug-in where its arguments say so.
func TestMain(m *testing.M) {
	if len(os.Args) > 2 && os.Args[1] == "serve" {
		serveForTest(os.Args[2:])
	}
	if len(os.Args) > 2 && os.Args[1] == "host" {
		hostForTest(os.Args[2:])
	}
	os.Exit(m.Run())
}

func serveForTest(args []string) {
	if args[0] == "hostile" {
		serveHostile(args[1:])
	}
	for _, f := range append(builtin.Stages(), probeFactory(), tellFactory(), unwrap.Factory(), deflectometry.Factory()) {
		if f.Type == args[0] {
			Serve(f)
		}
	}
	fmt.Fprintf(os.Stderr, "no stage %q\n", args[0])
	os.Exit(2)
}

// settingsFor returns how this test program is launched as a stage.
func settingsFor(args ...string) Settings {
	s := DefaultSettings()
	s.Name, s.Path, s.Args = strings.Join(args, " "), os.Args[0], append([]string{"serve"}, args...)
	s.SlotBytes = 8 << 20
	return s
}

func open(t *testing.T, s Settings) *Host {
	t.Helper()
	h, err := Open(context.Background(), s, slog.New(slog.NewTextHandler(io.Discard, nil)))
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { h.Close() })
	return h
}

// newStage builds a stage with settings that change lays over the defaults as JSON.
func newStage(t *testing.T, f pipeline.Factory, settings string) pipeline.Stage {
	t.Helper()
	s, _, err := f.New(decodeText(settings), pipeline.Environment{View: "ring", Geometry: pipeline.Planar{UMPerPx: 10}})
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// probeSettings try every kind of setting.
type probeSettings struct {
	Factor float64     `json:"factor"`
	Count  int         `json:"count"`
	Words  []string    `json:"words"`
	Rules  []probeRule `json:"rules"`
	On     bool        `json:"on"`
}

type probeRule struct {
	Kind string  `json:"kind"`
	Over float64 `json:"over"`
}

// Check implements pipeline.Checker.
func (s probeSettings) Check() error {
	switch {
	case !(s.Factor > 0):
		return fmt.Errorf("factor: got %g, want above 0", s.Factor)
	case len(s.Rules) > 0 && s.Rules[0].Kind == "":
		return fmt.Errorf("rules[0].kind: got nothing, want a kind")
	}
	return nil
}

// probeFactory is a stage that sums every pixel and does what its settings say.
func probeFactory() pipeline.Factory {
	born := float64(time.Now().UnixNano()) // tells processes apart; in a namespace each has the number 1
	return pipeline.Make(pipeline.Factory{Type: "probe", Version: "1", Scope: pipeline.ScopeView, Summary: "Sums every pixel.",
		Reads: []string{pipeline.RawPlane, "region"}, Writes: []string{"sum"}},
		probeSettings{Factor: 1, Words: []string{"a"}, Rules: []probeRule{{"dig", 3}}},
		func(s probeSettings, _ pipeline.Environment) (pipeline.Stage, error) {
			return pipeline.StageFunc(func(ctx context.Context, item *pipeline.Item) error {
				sum := 0.0
				for _, b := range item.Frames[0].Raw.Data {
					sum += float64(b)
				}
				item.Measure("sum", s.Factor*sum, "DN")
				item.Measure("born", born, "")
				return ctx.Err()
			}), nil
		})
}

// tiny returns an item with a frame of 24 × 16 px whose first byte is mark.
func tiny(mark byte) *pipeline.Item {
	raw := raster.NewRaw(raster.Mono8, 24, 16)
	for i := range raw.Data {
		raw.Data[i] = byte(i % 7)
	}
	raw.Data[0] = mark
	return &pipeline.Item{View: "ring", Frames: []pipeline.Frame{{Raw: raw}}, Geometry: pipeline.Planar{UMPerPx: 10}}
}

func sumOf(item *pipeline.Item) float64 {
	n := 0.0
	for _, b := range item.Frames[0].Raw.Data {
		n += float64(b)
	}
	return n
}

// eventually waits for a condition that other goroutines bring about.
func eventually(t *testing.T, what string, ok func() bool) {
	t.Helper()
	for range 500 {
		if ok() {
			return
		}
		time.Sleep(10 * time.Millisecond)
	}
	t.Fatalf("waited 5 s: %s", what)
}
