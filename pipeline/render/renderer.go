package render

import (
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Renderer draws the units of one scene. It is safe for concurrent use.
type Renderer struct {
	scene  Scene
	sensor *sensor
	maps   []viewMaps // by number of the view
}

// New checks the scene and makes the maps that all its frames share.
func New(s Scene) (*Renderer, error) {
	if err := s.Check(); err != nil {
		return nil, err
	}
	r := &Renderer{scene: s, sensor: newSensor(s.Camera, s.Seed)}
	for _, v := range s.Views {
		r.maps = append(r.maps, r.sensor.mapsOf(s, v))
	}
	return r, nil
}

// Scene returns the scene that is drawn.
func (r *Renderer) Scene() Scene { return r.scene }

// Views returns the names of the views in the scene's order.
func (r *Renderer) Views() []string {
	var out []string
	for _, v := range r.scene.Views {
		out = append(out, v.Name)
	}
	return out
}

func (r *Renderer) view(name string) (int, error) {
	if i := r.scene.viewIndex(name); i >= 0 {
		return i, nil
	}
	return 0, pipeline.NotFound("the scene has no view %q (has %v)", name, r.Views())
}

// Light returns the light of a unit in a view as it falls on the sensor, in DN at
// nominal pixel gain: vignetting, stray light and lamp power are in it, the camera's
// fixed pattern and noise are not. It adds a Sighting of this view to each object of u.
func (r *Renderer) Light(u *Unit, view string) (*raster.Plane, error) {
	i, err := r.view(view)
	if err != nil {
		return nil, err
	}
	v := r.scene.Views[i]
	plane := r.draw(u, v)
	power := float32(u.lampPower(view))
	for y := range plane.Height {
		row := plane.Row(y)
		for x := range row {
			row[x] = power * (row[x]*float32(r.scene.vignettingAt(v, float64(x), float64(y))) + float32(r.scene.strayAt(v, float64(x))))
		}
	}
	return plane, nil
}

// draw returns the scene before vignetting.
func (r *Renderer) draw(u *Unit, v View) *raster.Plane {
	st := r.stageOf(u, v)
	plane := st.background(r)
	if _, empty := u.spoiled(SpoilEmptyNest, v.Name); !empty {
		st.addObjects(plane)
		st.notch(plane)
	}
	st.spoil(plane, r)
	r.scene.addReference(plane, v)
	return plane
}

func (u Unit) lampPower(view string) float64 {
	if _, capped := u.spoiled(SpoilCap, view); capped {
		return 0
	}
	if factor, dim := u.spoiled(SpoilLamp, view); dim {
		return u.LampPower * factor
	}
	return u.LampPower
}

// Frame takes one frame of a unit. It adds a Sighting of the view to each object of u.
func (r *Renderer) Frame(u *Unit, view string) (pipeline.Frame, error) {
	i, err := r.view(view)
	if err != nil {
		return pipeline.Frame{}, err
	}
	light := r.draw(u, r.scene.Views[i])
	counts := r.sensor.expose(light, r.maps[i], u.lampPower(view), r.showingStream(*u, "noise "+view))
	if share, ok := u.spoiled(SpoilBlackBand, view); ok {
		rows := int(share * float64(light.Height))
		first := (light.Height - rows) / 2 * light.Width
		clear(counts[first : first+rows*light.Width])
	}
	if px, ok := u.spoiled(SpoilShift, view); ok {
		moveWindow(counts, light.Width, int(px))
	}
	h := r.header(u.Identity, view)
	h.Captured = u.Captured.Add(viewDelay * time.Duration(i))
	h.FrameCounter = uint64(u.Index*len(r.scene.Views) + i + 1)
	return r.frame(h, counts), nil
}

// moveWindow moves every row by px to the right, with the sensor's own pattern; what
// leaves the frame enters on the other side.
func moveWindow(counts []uint16, width, px int) {
	row := make([]uint16, width)
	for y := 0; y < len(counts); y += width {
		for x, v := range counts[y : y+width] {
			row[((x+px)%width+width)%width] = v
		}
		copy(counts[y:], row)
	}
}
