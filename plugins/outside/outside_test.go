package outside

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"image"
	"image/png"
	"reflect"
	"strings"
	"sync"
	"testing"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/plugins/builtin"
	"lapgate/plugins/flatfield"
	"lapgate/plugins/region"
	"lapgate/plugins/stagetest"
)

// view is an item as the camera and the calibration give it.
func view(raw raster.Raw) *pipeline.Item {
	w, h := raw.Width, raw.Height
	dark, response := raster.NewPlane(w, h), raster.NewPlane(w, h)
	for i := range response.Pix {
		dark.Pix[i] = float32(i % 3)
		response.Pix[i] = 0.9 + 0.05*float32(i%5)
	}
	cal := &pipeline.Calibration{Hash: "test", Dark: dark, Response: response, BadPixels: []pipeline.PixelAt{{X: 0, Y: 0}, {X: 75, Y: 60}}}
	return &pipeline.Item{View: "ring", Frames: []pipeline.Frame{{Raw: raw}}, Calibration: cal,
		Geometry: pipeline.Distorted{Planar: pipeline.Planar{UMPerPx: 10}, Lens: pipeline.Distortion{K1: -0.01, CentreX: 100, CentreY: 90, NormPx: 120}}}
}

// maker returns a function that makes items as stage i of the built-in ones gets them. What
// the stages before it made of a frame is made once: stages change none of it, which the
// suite itself looks at.
func maker(t *testing.T, i int) func(raster.Raw) *pipeline.Item {
	var mu sync.Mutex
	made := map[string]*pipeline.Item{}
	return func(raw raster.Raw) *pipeline.Item {
		mu.Lock()
		defer mu.Unlock()
		key := fmt.Sprint(raw.Format, raw.Width, raw.Height) + string(raw.Data)
		if made[key] == nil {
			made[key] = before(t, raw, i)
		}
		return made[key].Fork()
	}
}

// before returns an item as stage i of the built-in ones gets it.
func before(t *testing.T, raw raster.Raw, i int) *pipeline.Item {
	t.Helper()
	all := builtin.Stages()
	item := view(raw)
	for _, f := range all[:i] {
		if f.Scope == pipeline.ScopeView {
			runFactory(t, f, item)
		}
	}
	if all[i].Scope == pipeline.ScopeUnit {
		for n := range item.Defects {
			item.Defects[n].ID = n + 1
		}
		return &pipeline.Item{Views: []*pipeline.Item{item}, Defects: item.Defects}
	}
	return item
}

func runFactory(t *testing.T, f pipeline.Factory, item *pipeline.Item) {
	t.Helper()
	stage, _, err := f.New(nil, pipeline.Environment{View: item.View, Calibration: item.Calibration, Geometry: item.Geometry})
	if err == nil {
		err = stage.Run(context.Background(), item)
	}
	if err != nil {
		t.Fatalf("%s: %v", f.Type, err)
	}
}

// Every built-in stage passes the conformance suite outside too, and what it makes there
// is what it makes inside, to the last bit.
func TestBuiltinStagesOutside(t *testing.T) {
	for i, f := range builtin.Stages() {
		t.Run(f.Type, func(t *testing.T) {
			t.Parallel()
			h := open(t, settingsFor(f.Type))
			outside := h.Factory()
			if outside.Type != f.Type || outside.Version != f.Version || outside.Summary != f.Summary || outside.Scope != f.Scope || !reflect.DeepEqual(outside.Reads, f.Reads) {
				t.Errorf("described as %+v", outside)
			}
			in, out := before(t, stagetest.Scene(), i), before(t, stagetest.Scene(), i)
			runFactory(t, f, in)
			runFactory(t, outside, out)
			for _, item := range []*pipeline.Item{in, out} {
				if len(item.Frames) > 0 { // a stage that unpacks the frame leaves the raw plane behind
					_, _ = item.Raw()
				}
			}
			if stagetest.Digest(in) != stagetest.Digest(out) {
				t.Errorf("inside and outside differ\n in %+v\nout %+v", in, out)
			}
			if testing.Short() && i%4 != 1 { // the suite itself takes its time
				return
			}
			stagetest.Run(t, outside, maker(t, i))
			if s := h.Status(); s.Restarts != 0 {
				t.Errorf("restarted: %+v", s)
			}
		})
	}
}

// Pixels that travel in messages give the same as those in shared memory.
func TestBytesGiveTheSame(t *testing.T) {
	s := settingsFor("flatfield")
	s.BytesOnly = true
	a, b := view(stagetest.Scene()), view(stagetest.Scene())
	runFactory(t, open(t, s).Factory(), a)
	runFactory(t, open(t, settingsFor("flatfield")).Factory(), b)
	if len(a.Planes) == 0 || stagetest.Digest(a) != stagetest.Digest(b) {
		t.Error("bytes and shared memory differ")
	}
}

// A frame in the arena is sent without a copy: one that no slot could hold passes, and gives
// what any other does. When the arena is full, frames lie elsewhere and pass too.
func TestFramesInTheArena(t *testing.T) {
	const side = 100
	arena, err := NewArena(side * side)
	if err != nil {
		t.Fatal(err)
	}
	defer arena.Close()
	s := settingsFor("flatfield")
	s.Frames = arena
	h := open(t, s)
	narrow := settingsFor("probe")
	narrow.Frames, narrow.SlotBytes = arena, 4096
	probe := newStage(t, open(t, narrow).Factory(), "{}")
	for i := range 3 {
		raw := raster.NewRaw(raster.Mono8, side, side)
		raw.Data = arena.Allocate(side * side)
		copy(raw.Data, stagetest.Scene().Data)
		if _, in := arena.offset(raw.Data[7:]); in != (i == 0) {
			t.Errorf("frame %d: in the arena %v", i, in)
		}
		a, b := view(raw), view(raw)
		runFactory(t, flatfield.Factory, a)
		runFactory(t, h.Factory(), b)
		for _, item := range []*pipeline.Item{a, b} {
			_, _ = item.Raw()
		}
		if len(b.Planes) == 0 || stagetest.Digest(a) != stagetest.Digest(b) {
			t.Errorf("frame %d: inside and outside differ", i)
		}
		item := &pipeline.Item{View: "ring", Frames: []pipeline.Frame{{Raw: raw}}}
		if err := probe.Run(context.Background(), item); (err == nil) != (i == 0) {
			t.Errorf("frame %d, slots of 4096 bytes: %v", i, err)
		}
	}
}

func TestSettingsOutside(t *testing.T) {
	h := open(t, settingsFor("probe"))
	f := h.Factory()
	got, err := settingsText(f.Defaults)
	if want := `{"factor":1,"count":0,"words":["a"],"rules":[{"kind":"dig","over":3}],"on":false}`; err != nil || got != want {
		t.Errorf("defaults %s, %v, want %s", got, err, want)
	}
	_, settings, err := f.New(decodeText(`{"factor":2.5,"words":["b","c"]}`), pipeline.Environment{})
	if err != nil {
		t.Fatal(err)
	}
	if got, _ := settingsText(settings); got != `{"factor":2.5,"count":0,"words":["b","c"],"rules":[{"kind":"dig","over":3}],"on":false}` {
		t.Errorf("effective %s", got)
	}
	if again, _ := settingsText(f.Defaults); again != got {
		t.Errorf("the defaults have changed: %s", again)
	}
	for text, want := range map[string]string{
		`{"factor":-1}`:                    "factor: got -1, want above 0",
		`{"rules":[{"kind":"","over":1}]}`: "rules[0].kind: got nothing, want a kind",
	} {
		_, _, err := f.New(decodeText(text), pipeline.Environment{})
		if err == nil || err.Error() != want || pipeline.KindOf(err) != pipeline.InvalidKind {
			t.Errorf("%s: got %v, want %q", text, err, want)
		}
	}
	if err := f.Check(f.Defaults); err != nil {
		t.Errorf("defaults: %v", err)
	}
}

// A stage may ask for files beside the recipe when it is built.
func TestFilesBesideTheRecipe(t *testing.T) {
	f := open(t, settingsFor("region")).Factory()
	var mask bytes.Buffer
	if err := png.Encode(&mask, &image.Gray{Pix: []byte{255, 0, 255, 255}, Stride: 2, Rect: image.Rect(0, 0, 2, 2)}); err != nil {
		t.Fatal(err)
	}
	env := pipeline.Environment{View: "ring", Geometry: pipeline.Planar{UMPerPx: 10}, ReadFile: func(name string) ([]byte, error) {
		if name != "mask.png" {
			return nil, errors.New("no such file")
		}
		return mask.Bytes(), nil
	}}
	stage, settings, err := f.New(decodeText(`{"shape":"mask","mask_file":"mask.png"}`), env)
	if err != nil {
		t.Fatal(err)
	}
	if text, _ := settingsText(settings); !strings.Contains(text, `"mask_sha256":"`) || strings.Contains(text, `"mask_sha256":""`) {
		t.Errorf("the effective settings do not name the mask's content: %s", text)
	}
	item := &pipeline.Item{View: "ring", Geometry: env.Geometry, Frames: []pipeline.Frame{{Raw: raster.Pack(raster.Mono8, make([]uint16, 4), 2, 2)}}}
	if err := stage.Run(context.Background(), item); err != nil || item.Region.Mask().Count() != 3 {
		t.Errorf("got %v, %+v", err, item.Region)
	}
	if _, _, err := f.New(decodeText(`{"shape":"mask","mask_file":"other.png"}`), env); pipeline.KindOf(err) != pipeline.InvalidKind {
		t.Errorf("got %v", err)
	}
}

// While one unit breaks its stage, in whatever way, those beside it are given to the next
// process; only that one is held.
func TestOthersGoOn(t *testing.T) {
	for _, how := range []string{"hang", "panic", "nan"} {
		t.Run(how, func(t *testing.T) {
			t.Parallel()
			s := settingsFor("hostile", how)
			s.Deadline, s.MaxConcurrent, s.Backoff = 30*time.Second, 3, time.Millisecond
			if how == "hang" {
				s.Deadline = 700 * time.Millisecond
			}
			stage := newStage(t, open(t, s).Factory(), "{}")
			var wg sync.WaitGroup
			errs := make([]error, 9)
			for i := range errs {
				mark := byte(i)
				if i == 4 {
					mark = 255
				}
				wg.Go(func() { errs[i] = stage.Run(context.Background(), tiny(mark)) })
			}
			wg.Wait()
			for i, err := range errs {
				if (err != nil) != (i == 4) {
					t.Errorf("unit %d: %v", i, err)
				}
			}
		})
	}
}

// A caller that leaves is let go at once, and the stage is not disturbed.
func TestCallerLeaves(t *testing.T) {
	s := settingsFor("hostile", "hang")
	s.MaxConcurrent, s.Deadline = 1, 400*time.Millisecond
	h := open(t, s)
	stage := newStage(t, h.Factory(), "{}")
	ctx, cancel := context.WithTimeout(context.Background(), 50*time.Millisecond)
	defer cancel()
	if err := stage.Run(ctx, tiny(255)); !errors.Is(err, context.DeadlineExceeded) {
		t.Errorf("got %v", err)
	}
	if err := stage.Run(context.Background(), tiny(1)); err != nil { // waits until the slot is free again
		t.Error(err)
	}
}

func TestTooLargeForASlot(t *testing.T) {
	s := settingsFor("probe")
	s.SlotBytes = 4096
	raw := raster.NewRaw(raster.Mono8, 100, 100)
	err := newStage(t, open(t, s).Factory(), "{}").Run(context.Background(), &pipeline.Item{View: "ring", Frames: []pipeline.Frame{{Raw: raw}}})
	if err == nil || !strings.Contains(err.Error(), "raise slot_mb") {
		t.Errorf("got %v", err)
	}
}

func TestClosedHost(t *testing.T) {
	h := open(t, settingsFor("probe"))
	stage := newStage(t, h.Factory(), "{}")
	for range 2 {
		if err := h.Close(); err != nil {
			t.Error(err)
		}
	}
	if err := stage.Run(context.Background(), tiny(1)); err == nil || !strings.Contains(err.Error(), "the stage is closed") {
		t.Errorf("got %v", err)
	}
}

// Zones that a stage outside laid have the edge that they have inside, to the last bit:
// circles, polygons, and no edge where there is none.
func TestEdgesOfZonesOutside(t *testing.T) {
	f := open(t, settingsFor("region")).Factory()
	for _, settings := range []string{`{"shape":"circle","diameter_mm":1.2,"centre_x_px":99,"centre_y_px":90,"zones":[{"name":"clear","diameter_mm":0.8},{"name":"rim","diameter_mm":1.2,"inner_diameter_mm":0.8}]}`,
		`{"shape":"polygon","polygon":[{"x_px":20,"y_px":20},{"x_px":150,"y_px":30},{"x_px":90,"y_px":150}]}`, `{}`} {
		in, out := view(stagetest.Scene()), view(stagetest.Scene())
		for _, r := range []struct {
			f    pipeline.Factory
			item *pipeline.Item
		}{{region.Factory, in}, {f, out}} {
			if err := newStage(t, r.f, settings).Run(context.Background(), r.item); err != nil {
				t.Fatalf("%s: %v", settings, err)
			}
		}
		for i, z := range in.Region.Zones {
			o := out.Region.Zones[i]
			if (z.EdgeDistancePx == nil) != (o.EdgeDistancePx == nil) || !reflect.DeepEqual(z.Outline, o.Outline) || z.OuterDiameterMM != o.OuterDiameterMM {
				t.Errorf("%s: zone %s: %+v inside, %+v outside", settings, z.Name, z.Outline, o.Outline)
				continue
			}
			for _, p := range [][2]float64{{99.5, 90.25}, {33.3, 40.1}, {140, 100}} {
				if z.EdgeDistancePx != nil && z.EdgeDistancePx(p[0], p[1]) != o.EdgeDistancePx(p[0], p[1]) {
					t.Errorf("%s: zone %s at %v: %g inside, %g outside", settings, z.Name, p, z.EdgeDistancePx(p[0], p[1]), o.EdgeDistancePx(p[0], p[1]))
				}
			}
		}
	}
}
