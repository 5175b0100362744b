package outside

import (
	"context"
	"fmt"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/files"
	"lapgate/plugins/blobs"
	"lapgate/plugins/darkfield"
	"lapgate/plugins/deflectometry"
	"lapgate/plugins/flatfield"
	"lapgate/plugins/region"
	"lapgate/plugins/stagetest"
	"lapgate/plugins/unwrap"
)

// shipped is a stage that ships as a plug-in, with its demo frames.
type shipped struct {
	factory       pipeline.Factory
	settings      string
	frames        []string
	umPerPx       float64
	before, after []pipeline.Factory
	small         string  // settings for the frames of the conformance suite
	smallUMPerPx  float64 // and their scale
}

func shippedPlugins() []shipped {
	var fringes []string
	for i := range 16 {
		fringes = append(fringes, fmt.Sprintf("demo/fringes_%02d.png", i))
	}
	return []shipped{
		// after unwrap, stages inside measure on the surface that it laid out
		{unwrap.Factory(), `{"inner_radius_px":75,"outer_radius_px":175}`, []string{"demo/unwrap.png"}, 80,
			nil, []pipeline.Factory{flatfield.Factory, darkfield.Factory, blobs.Factory}, `{"inner_radius_px":30,"outer_radius_px":60,"grid_px":16}`, 220},
		{deflectometry.Factory(), `{}`, fringes, 10, []pipeline.Factory{region.Factory}, nil, `{}`, 10},
	}
}

// The stages that ship as plug-ins give outside what they give inside, to the last bit, on
// their demo frames, and so do the stages after them.
func TestPluginsOutside(t *testing.T) {
	for _, c := range shippedPlugins() {
		t.Run(c.factory.Type, func(t *testing.T) {
			t.Parallel()
			h := open(t, settingsFor(c.factory.Type))
			in, out := c.item(t), c.item(t)
			c.run(t, c.factory, in)
			c.run(t, h.Factory(), out)
			if len(in.Defects) == 0 || stagetest.Digest(in) != stagetest.Digest(out) {
				t.Errorf("inside and outside differ\n in %+v %+v\nout %+v %+v", in.Geometry, in.Defects, out.Geometry, out.Defects)
			}
			if _, ring := out.Geometry.(pipeline.Annulus); ring != (c.factory.Type == "unwrap") {
				t.Errorf("the geometry outside is %+v", out.Geometry)
			}
			if s := h.Status(); s.Restarts != 0 {
				t.Errorf("restarted: %+v", s)
			}
		})
	}
}

// They pass the conformance suite outside too.
func TestPluginsConformOutside(t *testing.T) {
	for _, c := range shippedPlugins() {
		t.Run(c.factory.Type, func(t *testing.T) {
			t.Parallel()
			f := open(t, settingsFor(c.factory.Type)).Factory()
			build := f.New
			f.New = func(_ pipeline.Decode, env pipeline.Environment) (pipeline.Stage, any, error) {
				return build(decodeText(c.small), env)
			}
			stagetest.Run(t, f, func(raw raster.Raw) *pipeline.Item {
				item := &pipeline.Item{View: "ring", Geometry: pipeline.Planar{UMPerPx: c.smallUMPerPx}}
				for range c.frames {
					item.Frames = append(item.Frames, pipeline.Frame{Raw: raw})
				}
				for _, b := range c.before {
					runFactory(t, b, item)
				}
				return item
			})
		})
	}
}

func (c shipped) item(t *testing.T) *pipeline.Item {
	t.Helper()
	item := &pipeline.Item{View: "ring", Geometry: pipeline.Planar{UMPerPx: c.umPerPx}}
	for _, name := range c.frames {
		raw, err := files.Read(name, files.Options{})
		if err != nil {
			t.Fatal(err)
		}
		item.Frames = append(item.Frames, pipeline.Frame{Raw: raw})
	}
	return item
}

func (c shipped) run(t *testing.T, f pipeline.Factory, item *pipeline.Item) {
	t.Helper()
	for _, b := range c.before {
		runFactory(t, b, item)
	}
	if err := newStage(t, f, c.settings).Run(context.Background(), item); err != nil {
		t.Fatal(err)
	}
	for _, a := range c.after {
		runFactory(t, a, item)
	}
	if _, err := item.Raw(); err != nil {
		t.Fatal(err)
	}
}
