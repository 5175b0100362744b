package outside

import (
	"context"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/plugins/stagetest"
)

// pythonStage writes a program and returns how it is launched. It is Debian's Python
// that has the packages.
func pythonStage(t *testing.T, text string) Settings {
	t.Helper()
	const python = "/usr/bin/python3"
	if out, err := exec.Command(python, "-c", "import grpc, numpy, google.protobuf").CombinedOutput(); err != nil {
		t.Skipf("%s has no python3-grpcio, python3-protobuf or python3-numpy: %v\n%s", python, err, out)
	}
	path := filepath.Join(t.TempDir(), "stage.py")
	if err := os.WriteFile(path, []byte(text), 0o755); err != nil {
		t.Fatal(err)
	}
	kit, err := filepath.Abs("python")
	if err != nil {
		t.Fatal(err)
	}
	s := DefaultSettings()
	s.Name, s.Path, s.SlotBytes = "python", path, 8<<20
	s.Env = map[string]string{"PYTHONPATH": kit, "PYTHONDONTWRITEBYTECODE": "1"}
	return s
}

// The plug-in of the guide, as it stands there, is short, passes the suite, and finds
// what is drawn.
func TestGuide(t *testing.T) {
	t.Parallel()
	guide, err := os.ReadFile("GUIDE.md")
	if err != nil {
		t.Fatal(err)
	}
	m := regexp.MustCompile("(?s)```python\n(.*?)```").FindSubmatch(guide)
	if m == nil {
		t.Fatal("the guide has no Python program")
	}
	text := string(m[1])
	if n := strings.Count(text, "\n"); n >= 40 {
		t.Errorf("the guide's program has %d lines, want fewer than 40", n)
	}
	h := open(t, pythonStage(t, text))
	f := h.Factory()
	stagetest.Run(t, f, func(raw raster.Raw) *pipeline.Item {
		return &pipeline.Item{View: "back", Frames: []pipeline.Frame{{Raw: raw}}, Geometry: pipeline.Planar{UMPerPx: 10}}
	})
	spots := [][3]int{{60, 40, 6}, {150, 90, 9}} // x, y and radius of two discs, px
	counts := make([]uint16, 200*120)
	for i := range counts {
		counts[i] = 200
		for _, s := range spots {
			if dx, dy := i%200-s[0], i/200-s[1]; dx*dx+dy*dy <= s[2]*s[2] {
				counts[i] = 30
			}
		}
	}
	item := &pipeline.Item{View: "back", Frames: []pipeline.Frame{{Raw: raster.Pack(raster.Mono12, counts, 200, 120)}}, Geometry: pipeline.Planar{UMPerPx: 10}}
	if err := newStage(t, f, `{"share":0.4}`).Run(context.Background(), item); err != nil {
		t.Fatal(err)
	}
	if len(item.Defects) != 2 {
		t.Fatalf("%d defects, want 2: %+v", len(item.Defects), item.Defects)
	}
	for i, d := range item.Defects {
		s := spots[i]
		if math.Abs(d.XPx-float64(s[0])) > 1e-9 || math.Abs(d.YPx-float64(s[1])) > 1e-9 || math.Abs(d.DiameterUM-20*float64(s[2])) > 5 ||
			d.Box != (pipeline.Box{X0: s[0] - s[2], Y0: s[1] - s[2], X1: s[0] + s[2] + 1, Y1: s[1] + s[2] + 1}) || d.View != "back" || d.UUM == 0 {
			t.Errorf("got %+v, want the disc %v", d, s)
		}
	}
	if _, _, err := f.New(decodeText(`{"share":5}`), pipeline.Environment{}); err == nil || err.Error() != "share: got 5, want above 0 and below 1" {
		t.Errorf("got %v", err)
	}
}

const looks = `#!/usr/bin/python3
import numpy as np
import lapgate_stage as lap

def run(item, s):
    f = item.frame
    weights = np.arange(1, f.size + 1, dtype=np.float64).reshape(f.shape)
    item.measure("weighted", (f * weights).sum())
    item.measure("copied", f.flags.owndata)
    item.measure("writable", f.flags.writeable)
    if f.flat[0] == 13:
        raise ValueError("thirteen")
    item.write("doubled", 2.0 * f, "DN")
    item.measure("um_per_px", item.um_per_px)
    item.measure("region_px", -1 if item.region is None else item.region.sum())
    item.prove("level", f.mean(), 0, 1e9, "DN")

lap.serve(type="looks", version="1", summary="Looks at a frame.", reads=["raw", "region"], writes=["doubled"],
          settings={"names": ["a"], "on": False, "n": 3}, run=run)
`

// Python sees the counts of every pixel format as they are, and those of whole bytes
// without a copy; planes come back; an exception is the unit's, not the process's.
func TestPythonSeesTheFrame(t *testing.T) {
	t.Parallel()
	h := open(t, pythonStage(t, looks))
	stage := newStage(t, h.Factory(), `{"n":4}`)
	for _, format := range raster.PixelFormats() {
		const w, height = 13, 5
		counts := make([]uint16, w*height)
		want := 0.0
		for i := range counts {
			counts[i] = uint16((i*2654435 + 7) % (format.MaxCount() + 1))
			want += float64(counts[i]) * float64(i+1)
		}
		region := pipeline.NewRegion(w, height, 6, 2, 0, []pipeline.Zone{{Name: "all", Spans: []raster.Span{{Y: 1, X0: 2, X1: 9}, {Y: 4, X0: 0, X1: 13}}}})
		item := &pipeline.Item{View: "ring", Region: region, Frames: []pipeline.Frame{{Raw: raster.Pack(format, counts, w, height)}}}
		if err := stage.Run(context.Background(), item); err != nil {
			t.Fatalf("%s: %v", format, err)
		}
		got, _ := item.Number("weighted")
		copied, _ := item.Number("copied")
		writable, _ := item.Number("writable")
		regionPx, _ := item.Number("region_px")
		whole := format == raster.Mono8 || format == raster.Mono10 || format == raster.Mono12 || format == raster.Mono16
		if got != want || whole && copied+writable != 0 || regionPx != 20 {
			t.Errorf("%s: sum %g, want %g; copied %g, writable %g, region %g px", format, got, want, copied, writable, regionPx)
		}
		plane, err := item.Plane("doubled")
		if err != nil || plane.At(12, 4) != 2*float32(counts[64]) || len(item.Proofs) != 1 || !item.Proofs[0].OK {
			t.Errorf("%s: plane %v, %v, proofs %+v", format, plane, err, item.Proofs)
		}
	}
	ring := tiny(1)
	ring.Geometry = pipeline.Annulus{CentreX: 11.5, CentreY: 7.5, InnerPx: 3, OuterPx: 7, InnerUM: 40, OuterUM: 60, SlantUM: 50}
	if err := stage.Run(context.Background(), ring); err != nil {
		t.Fatal(err)
	}
	_, _, want := ring.Geometry.ToStation(11.5+5, 7.5)
	if got, _ := ring.Number("um_per_px"); math.Abs(got-want) > 1e-12 {
		t.Errorf("scale of a ring: %g, want %g", got, want)
	}
	err := stage.Run(context.Background(), tiny(13))
	if err == nil || !strings.Contains(err.Error(), "ValueError: thirteen") || h.Status().Restarts != 0 {
		t.Errorf("got %v, %+v", err, h.Status())
	}
}
