package outside

import (
	"context"
	"fmt"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster/files"
	"lapgate/plugins/deflectometry"
	"lapgate/plugins/region"
	"lapgate/plugins/stagetest"
	"lapgate/plugins/unwrap"
)

// The stages that ship as plug-ins give outside what they give inside, to the last bit,
// on their demo frames.
func TestPluginsOutside(t *testing.T) {
	var fringes []string
	for i := range 8 {
		fringes = append(fringes, fmt.Sprintf("demo/fringes_%d.png", i))
	}
	for _, c := range []struct {
		factory  pipeline.Factory
		settings string
		frames   []string
		before   []pipeline.Factory
	}{
		{unwrap.Factory(), `{"inner_radius_px":75,"outer_radius_px":175}`, []string{"demo/unwrap.png"}, nil},
		{deflectometry.Factory(), `{"both_directions":false}`, fringes, []pipeline.Factory{region.Factory}},
	} {
		t.Run(c.factory.Type, func(t *testing.T) {
			h := open(t, settingsFor(c.factory.Type))
			in, out := demoItem(t, c.frames), demoItem(t, c.frames)
			for _, r := range []struct {
				f    pipeline.Factory
				item *pipeline.Item
			}{{c.factory, in}, {h.Factory(), out}} {
				for _, f := range c.before {
					runFactory(t, f, r.item)
				}
				if err := newStage(t, r.f, c.settings).Run(context.Background(), r.item); err != nil {
					t.Fatal(err)
				}
				if _, err := r.item.Raw(); err != nil {
					t.Fatal(err)
				}
			}
			if len(in.Defects) == 0 || stagetest.Digest(in) != stagetest.Digest(out) {
				t.Errorf("inside and outside differ\n in %+v\nout %+v", in.Defects, out.Defects)
			}
		})
	}
}

func demoItem(t *testing.T, names []string) *pipeline.Item {
	t.Helper()
	item := &pipeline.Item{View: "ring", Geometry: pipeline.Planar{UMPerPx: 10}}
	for _, name := range names {
		raw, err := files.Read(name, files.Options{})
		if err != nil {
			t.Fatal(err)
		}
		item.Frames = append(item.Frames, pipeline.Frame{Raw: raw})
	}
	return item
}
