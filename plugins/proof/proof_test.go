package proof

import (
	"context"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/render"
	"lapgate/plugins/stagetest"
)

func settings(change func(*Settings)) pipeline.Decode {
	return func(dst any) error {
		s := dst.(*Settings)
		s.PatchXPx, s.PatchYPx, s.PatchWidthPx, s.PatchHeightPx, s.CounterStep = 6, 6, 32, 32, 3
		if change != nil {
			change(s)
		}
		return nil
	}
}

func stageFor(t *testing.T, r *stagetest.Rendered, view string, change func(*Settings)) pipeline.Stage {
	t.Helper()
	st, _, err := Factory.New(settings(change), r.Env(view))
	if err != nil {
		t.Fatal(err)
	}
	return st
}

func prove(t *testing.T, st pipeline.Stage, item *pipeline.Item) map[string]pipeline.Proof {
	t.Helper()
	if err := st.Run(context.Background(), item); err != nil {
		t.Fatal(err)
	}
	out := map[string]pipeline.Proof{}
	for _, p := range item.Proofs {
		out[p.Name] = p
	}
	return out
}

// scene has one spoiler for each unit but 0, and a lamp of 90 to 110 %.
func scene(spoilers ...render.Spoiler) render.Scene {
	s := stagetest.SmallScene()
	s.Lamp = render.Lamp{MinPower: 0.9, MaxPower: 1.1}
	for i, sp := range spoilers {
		sp.Unit = i + 1
		s.Spoilers = append(s.Spoilers, sp)
	}
	return s
}

func TestWhatIsRightIsProven(t *testing.T) {
	r := stagetest.Render(t, scene())
	for _, view := range r.Views() {
		st := stageFor(t, r, view, nil)
		for i := range 6 {
			u := r.Unit(i)
			got := prove(t, st, r.Item(&u, view))
			for _, name := range []string{pipeline.ProofLight, pipeline.ProofLive, pipeline.ProofPattern} {
				if p, ok := got[name]; !ok || !p.OK {
					t.Errorf("view %s unit %d: %s: %+v", view, i, name, p)
				}
			}
			if v := got[pipeline.ProofLight].Value; v < u.LampPower-0.02 || v > u.LampPower+0.02 {
				t.Errorf("view %s unit %d: light %.3f of the calibration, the lamp had %.3f", view, i, v, u.LampPower)
			}
		}
	}
}

func TestCausesAreNamed(t *testing.T) {
	spoilers := []render.Spoiler{{Kind: render.SpoilLamp}, {Kind: render.SpoilLamp, Value: 0.3}, {Kind: render.SpoilCap}, {Kind: render.SpoilLamp, Value: 1.5},
		{Kind: render.SpoilBlackBand, Value: 0.1}, {Kind: render.SpoilShift, Value: 2}}
	want := []struct{ proof, text string }{{"light", "lamp is off"}, {"light", "lamp is weak"}, {"light", "lens is capped"}, {"light", "too bright"},
		{"live data", "lines were not transferred"}, {"pattern", "(+2, +0) px from where they were, so the read-out window moved"}}
	r := stagetest.Render(t, scene(spoilers...))
	for i, w := range want {
		u := r.Unit(i + 1)
		p := prove(t, stageFor(t, r, "ring", nil), r.Item(&u, "ring"))[w.proof]
		if p.OK || !strings.Contains(p.Reason, w.text) {
			t.Errorf("%s: got %+v, want a reason with %q", spoilers[i].Kind, p, w.text)
		}
	}
}

func TestSwappedViews(t *testing.T) {
	r := stagetest.Render(t, scene())
	for view, other := range map[string]string{"ring": "bar", "bar": "ring"} {
		u := r.Unit(0)
		item := r.Item(&u, other)
		item.View = view
		p := prove(t, stageFor(t, r, view, nil), item)[pipeline.ProofLight]
		if p.OK || !strings.Contains(p.Reason, "swapped: it is the level of view "+other) {
			t.Errorf("view %s: got %+v", view, p)
		}
	}
	u := r.Unit(1)
	item := r.Item(&u, "ring")
	item.Frames[0].Header.Tags = map[string]string{"light": "bar"}
	p := prove(t, stageFor(t, r, "ring", func(s *Settings) { s.LightTag = "light" }), item)[pipeline.ProofLight]
	if p.OK || !strings.Contains(p.Reason, "swapped or the wrong lamp") {
		t.Errorf("by the tag: got %+v", p)
	}
}

func TestRepeatsAndGaps(t *testing.T) {
	r := stagetest.Render(t, scene())
	st := stageFor(t, r, "ring", nil)
	take := func(i int) *pipeline.Item { u := r.Unit(i); return r.Item(&u, "ring") }
	first, second := take(0), take(1)
	for _, item := range []*pipeline.Item{first, second, first.Fork()} { // the last is the same showing inspected again
		item.Proofs = nil
		if p := prove(t, st, item)[pipeline.ProofLive]; !p.OK {
			t.Errorf("%+v", p)
		}
	}
	again := take(2)
	again.Frames[0].Raw, again.Frames[0].Header.CRC32C = first.Frames[0].Raw, first.Frames[0].Header.CRC32C
	if p := prove(t, st, again)[pipeline.ProofLive]; p.OK || !strings.Contains(p.Reason, "repeated: bit for bit the one of unit T001") {
		t.Errorf("repeated: got %+v", p)
	}
	if p := prove(t, st, take(4))[pipeline.ProofLive]; p.OK || !strings.Contains(p.Reason, "counter went from 4 to 13, want 7") {
		t.Errorf("gap: got %+v", p)
	}
	if p := prove(t, st, take(3))[pipeline.ProofLive]; p.OK || !strings.Contains(p.Reason, "started anew") {
		t.Errorf("backwards: got %+v", p)
	}
	other := take(5)
	other.Frames[0].Header.Station = "B1"
	if p := prove(t, st, other)[pipeline.ProofLive]; !p.OK {
		t.Errorf("another station: got %+v", p)
	}
}

func TestPhotodiode(t *testing.T) {
	diode := func(s *Settings) {
		s.PatchWidthPx, s.PatchHeightPx, s.PhotodiodeTag, s.PhotodiodeNominal = 0, 0, "photodiode", 2000
	}
	r := stagetest.Render(t, scene())
	for value, want := range map[string]string{"1980": "", "900": "the photodiode shows 45 %", "": "want the photodiode's number", "NaN": "want the photodiode's number"} {
		u := r.Unit(0)
		item := r.Item(&u, "ring")
		item.Frames[0].Header.Tags = map[string]string{"photodiode": value}
		p := prove(t, stageFor(t, r, "ring", diode), item)[pipeline.ProofLight]
		if p.OK != (want == "") || !strings.Contains(p.Reason, want) {
			t.Errorf("%q: got %+v", value, p)
		}
	}
}

// The lamp gets weaker from unit to unit: steady, then warnings that say what to look at,
// then holds.
func TestALampThatDropsIsWarnedOfBeforeItHolds(t *testing.T) {
	powers := []float64{1, 0.97, 0.93, 0.88, 0.83, 0.7}
	want := []string{"steady", "steady", "warning", "warning", "hold", "hold"}
	s := stagetest.SmallScene()
	for i, power := range powers {
		s.Spoilers = append(s.Spoilers, render.Spoiler{Unit: i, Kind: render.SpoilLamp, Value: power})
	}
	r := stagetest.Render(t, s)
	st := stageFor(t, r, "ring", nil)
	for i, power := range powers {
		u := r.Unit(i)
		p := prove(t, st, r.Item(&u, "ring"))[pipeline.ProofLight]
		if p.State() != want[i] || p.Value < power-0.02 || p.Value > power+0.02 {
			t.Errorf("lamp at %v: %s, %+v, want %s", power, p.State(), p, want[i])
		}
		if want[i] == "warning" && !strings.Contains(p.Warning, "the lamp is weak") {
			t.Errorf("lamp at %v: the warning says %q", power, p.Warning)
		}
	}
}

// Of a sequence every frame is looked at, not the first alone.
func TestTheWorstFrameOfASequenceCounts(t *testing.T) {
	r := stagetest.Render(t, scene(render.Spoiler{Kind: render.SpoilLamp, Value: 0.3}))
	good, dim := r.Unit(0), r.Unit(1)
	item := r.Item(&good, "ring")
	item.Frames = append(item.Frames, r.Item(&dim, "ring").Frames...)
	p := prove(t, stageFor(t, r, "ring", nil), item)[pipeline.ProofLight]
	if p.OK || !strings.Contains(p.Reason, "lamp is weak") {
		t.Errorf("got %+v", p)
	}
}

// A picture that was on record before the stage was made is a repeat too; the same showing
// inspected again is none.
func TestWhatIsOnRecordIsRemembered(t *testing.T) {
	r := stagetest.Render(t, scene())
	u := r.Unit(0)
	before := r.Item(&u, "ring")
	before.Frames[0].Header.CRC32C = pipeline.Checksum(before.Frames[0].Raw.Data)
	before.Frames[0].Header.Stride, before.Frames[0].Header.Height = before.Frames[0].Raw.Stride, before.Frames[0].Raw.Height
	env := r.Env("ring")
	asked := 0
	env.Earlier = func(most int) ([]pipeline.FrameHeader, error) {
		asked = most
		return []pipeline.FrameHeader{before.Frames[0].Header}, nil
	}
	st, _, err := Factory.New(settings(nil), env)
	if err != nil || asked != Default.RepeatFrames {
		t.Fatalf("asked for %d, %v", asked, err)
	}
	if p := prove(t, st, before.Fork())[pipeline.ProofLive]; !p.OK {
		t.Errorf("the same showing: %+v", p)
	}
	next := r.Unit(1)
	again := r.Item(&next, "ring")
	again.Frames[0].Raw, again.Frames[0].Header.CRC32C = before.Frames[0].Raw, before.Frames[0].Header.CRC32C
	if p := prove(t, st, again)[pipeline.ProofLive]; p.OK || !strings.Contains(p.Reason, "bit for bit the one of unit T001") {
		t.Errorf("another unit: %+v", p)
	}
}

func TestDeadParts(t *testing.T) {
	p := raster.NewPlane(64, 48)
	for i := range p.Pix {
		p.Pix[i] = float32(i*7919%251 + i%13)
	}
	if d := findDead(p, 16, 255); d != (dead{}) {
		t.Fatalf("nothing is wrong, got %+v", d)
	}
	copy(p.Row(5), p.Row(4))
	for y := range p.Height {
		p.Set(9, y, 3)
	}
	for y := 16; y < 32; y++ {
		for x := 32; x < 48; x++ {
			p.Set(x, y, 77)
		}
	}
	if d := findDead(p, 16, 255); d != (dead{rows: 1, firstRow: 5, columns: 1, firstColumn: 9, blocks: 1, firstX: 32, firstY: 16}) {
		t.Errorf("got %+v", d)
	}
}

func TestPatchThatIsNotThere(t *testing.T) {
	r := stagetest.Render(t, scene())
	for name, change := range map[string]func(*Settings){
		"dark":   func(s *Settings) { s.PatchXPx = 200 },
		"beyond": func(s *Settings) { s.PatchXPx = 390 },
	} {
		if _, _, err := Factory.New(settings(change), r.Env("ring")); pipeline.KindOf(err) != pipeline.InvalidKind {
			t.Errorf("%s: got %v", name, err)
		}
	}
}

func TestCheckNamesTheKey(t *testing.T) {
	for key, change := range map[string]func(*Settings){
		"patch_height_px": func(s *Settings) { s.PatchWidthPx = 3 }, "patch_x_px": func(s *Settings) { s.PatchXPx = -1 },
		"light": func(s *Settings) { s.Light.HoldAbove = 0.9 }, "block_px": func(s *Settings) { s.BlockPx = 2 },
		"photodiode_nominal": func(s *Settings) { s.PhotodiodeTag = "p" }, "pattern": func(s *Settings) { s.Pattern.WarnBelow = 2 },
	} {
		s := Default
		change(&s)
		if err := s.Check(); err == nil || !strings.HasPrefix(err.Error(), key+": ") {
			t.Errorf("%s: got %v", key, err)
		}
	}
}
