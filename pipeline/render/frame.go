package render

import (
	"slices"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// viewDelay is between the captures of two views of a unit.
const viewDelay = 150 * time.Millisecond

func (r *Renderer) header(id pipeline.Identity, view string) pipeline.FrameHeader {
	c := r.scene.Camera
	return pipeline.FrameHeader{Identity: id, View: view, Count: 1, CameraID: c.ID, Captured: r.scene.start(),
		Capture: pipeline.Capture{Format: c.format(), Width: c.Width, Height: c.Height, ExposureUS: c.ExposureUS,
			GainDB: c.GainDB, BlackLevel: c.BlackLevelDN, BinningX: 1, BinningY: 1}}
}

// frame packs counts and completes the header.
func (r *Renderer) frame(h pipeline.FrameHeader, counts []uint16) pipeline.Frame {
	raw := raster.Pack(h.Format, counts, h.Width, h.Height)
	h.Stride, h.CRC32C = raw.Stride, pipeline.Checksum(raw.Data)
	return pipeline.Frame{Header: h, Raw: raw}
}

// Shoot takes all frames of a unit and returns them with the truth.
func (r *Renderer) Shoot(u Unit) ([]pipeline.View, Truth, error) {
	var views []pipeline.View
	u.Objects = slices.Clone(u.Objects)
	for i := range u.Objects {
		u.Objects[i].Sightings = nil
	}
	for _, name := range r.Views() {
		f, err := r.Frame(&u, name)
		if err != nil {
			return nil, Truth{}, err
		}
		views = append(views, pipeline.View{Name: name, Frames: []pipeline.Frame{f}})
	}
	return views, r.truth(u), nil
}

// The kinds of calibration frame.
const (
	FrameDark     = "dark"     // lamp off
	FrameStray    = "stray"    // lamp on, a light trap in place of the part
	FrameResponse = "response" // lamp on, a diffuser over the whole field
	FramePart     = "part"     // lamp on, a part without a defect, of each process in turn
)

// CalibrationFrame takes the n-th calibration frame of a kind for a view, n from 0. The
// reference patch is part of the nest and shines in stray frames too; the diffuser of
// response frames hides it.
func (r *Renderer) CalibrationFrame(kind, view string, n int) (pipeline.Frame, error) {
	i, err := r.view(view)
	if err != nil {
		return pipeline.Frame{}, err
	}
	if kind == FramePart {
		return r.partFrame(view, n)
	}
	c, v := r.scene.Camera, r.scene.Views[i]
	light, maps, power := raster.NewPlane(c.Width, c.Height), r.maps[i], 1.0
	switch kind {
	case FrameDark:
		power = 0
	case FrameStray:
		r.scene.addReference(light, v)
	case FrameResponse:
		for i := range light.Pix {
			light.Pix[i] = float32(v.ResponseDN)
		}
	default:
		return pipeline.Frame{}, pipeline.Invalid("calibration frame: got %q, want %s, %s, %s or %s", kind, FrameDark, FrameStray, FrameResponse, FramePart)
	}
	counts := r.sensor.expose(light, maps, power, r.sensor.frameStream(kind, view, n))
	line := r.scene.Lines[0]
	h := r.header(pipeline.Identity{Part: r.scene.Part.Number, Unit: kind, Line: line.Name, Station: line.Station, Attempt: 1, Purpose: pipeline.Setup}, view)
	h.FrameCounter = uint64(n + 1)
	return r.frame(h, counts), nil
}

// partShowing is from where on showings are those of calibration parts: no unit is shown
// so often.
const partShowing = 1 << 20

// partFrame takes a frame of a conforming part at nominal lamp power.
func (r *Renderer) partFrame(view string, n int) (pipeline.Frame, error) {
	u := r.Showing(n*r.scene.UnitsPerLot, partShowing+n)
	u.Process = r.scene.Processes[n%len(r.scene.Processes)]
	u.HazeDN = u.Process.HazeDN.draw(r.unitStream(u, "haze"))
	u.Objects, u.Spoilers, u.LampPower, u.DiameterMM = nil, nil, 1, r.scene.Part.DiameterMM
	f, err := r.Frame(&u, view)
	line := r.scene.Lines[0]
	f.Header.Identity = pipeline.Identity{Part: r.scene.Part.Number, Unit: FramePart, Line: line.Name, Station: line.Station, Attempt: 1, Purpose: pipeline.Setup}
	f.Header.Captured, f.Header.FrameCounter = r.scene.start(), uint64(n+1)
	return f, err
}
