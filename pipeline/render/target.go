package render

import (
	"math"
	"strconv"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Target is a plate with a square grid of dots in place of the part, seen through a lens
// that may distort.
type Target struct {
	Name         string    `yaml:"name"`   // of its folder of calibration frames
	Frames       int       `yaml:"frames"` // that are taken, each laid down anew
	PitchUM      float64   `yaml:"pitch_um"`
	Columns      int       `yaml:"columns"`
	Rows         int       `yaml:"rows"`
	DiametersUM  []float64 `yaml:"diameters_um"`  // by number of the dot, row by row from the top; dealt out again from the first where there are fewer
	BackgroundDN float64   `yaml:"background_dn"` // of the plate
	BrightnessDN float64   `yaml:"brightness_dn"` // of a dot of ReferenceUM above it; below 0: dark dots
	FluxExponent float64   `yaml:"flux_exponent"` // a dot's flux grows with its diameter to this power; 0 is read as 2
	ReferenceUM  float64   `yaml:"reference_um"`  // 0 is read as the first diameter
	Spread       float64   `yaml:"spread"`        // relative scatter of the dots' flux about that law
	RotationDeg  float64   `yaml:"rotation_deg"`  // of the plate
	ShiftXPx     float64   `yaml:"shift_x_px"`    // of its middle from the frame's
	ShiftYPx     float64   `yaml:"shift_y_px"`
	K1           float64   `yaml:"k1"` // of the lens, see pipeline.Distortion; its norm is half of the frame's diagonal
	K2           float64   `yaml:"k2"`
	LensXPx      float64   `yaml:"lens_x_px"` // of the distortion's centre from the frame's
	LensYPx      float64   `yaml:"lens_y_px"`
}

// Lens returns the distortion in the frame of a camera.
func (t Target) Lens(c Camera) pipeline.Distortion {
	return pipeline.Distortion{K1: t.K1, K2: t.K2, CentreX: float64(c.Width-1)/2 + t.LensXPx, CentreY: float64(c.Height-1)/2 + t.LensYPx,
		NormPx: math.Hypot(float64(c.Width), float64(c.Height)) / 2}
}

// laid returns the target as it lies for its n-th frame, n from 0: turned by 2° and moved
// by a few pixels each time.
func (t Target) laid(n int) Target {
	t.RotationDeg += 2 * float64(n)
	t.ShiftXPx += 3.3 * float64(n)
	t.ShiftYPx -= 2.7 * float64(n)
	return t
}

// TargetDot is what is true of one dot.
type TargetDot struct {
	Column     int     `json:"column"` // from the left, 0-based
	Row        int     `json:"row"`    // from the top
	XPx        float64 `json:"x_px"`
	YPx        float64 `json:"y_px"`
	DiameterUM float64 `json:"diameter_um"`
	FluxDNPx   float64 `json:"flux_dn_px"` // at full light, without vignetting
}

func (t Target) check() error {
	if len(t.DiametersUM) == 0 {
		return pipeline.Invalid("target: got no diameters, want at least one")
	}
	for _, d := range t.DiametersUM {
		if !(d > 0 && d < t.PitchUM) {
			return pipeline.Invalid("target: got a dot of %g µm, want above 0 and below the pitch of %g", d, t.PitchUM)
		}
	}
	return firstBad(within("target frames", float64(t.Frames), 0, 1000), within("target columns", float64(t.Columns), 1, 1000), within("target rows", float64(t.Rows), 1, 1000),
		within("target flux_exponent", t.FluxExponent, 0, 8), within("target spread", t.Spread, 0, 1),
		within("target k1", t.K1, -0.2, 0.2), within("target k2", t.K2, -0.05, 0.05))
}

// TargetFrame takes the n-th frame of a target under a view's light, n from 0, the target
// laid down anew each time, and returns what is true of the dots whose middle lies in it.
func (r *Renderer) TargetFrame(view string, t Target, n int) (pipeline.Frame, []TargetDot, error) {
	i, err := r.view(view)
	if err == nil {
		err = t.check()
	}
	if err != nil {
		return pipeline.Frame{}, nil, err
	}
	light := raster.NewPlane(r.scene.Camera.Width, r.scene.Camera.Height)
	for k := range light.Pix {
		light.Pix[k] = float32(t.BackgroundDN)
	}
	r.scene.addReference(light, r.scene.Views[i])
	dots := r.drawDots(light, t.laid(n))
	counts := r.sensor.expose(light, r.maps[i], 1, r.sensor.frameStream("target "+t.Name, view, n))
	line := r.scene.Lines[0]
	h := r.header(pipeline.Identity{Part: r.scene.Part.Number, Unit: "target", Line: line.Name, Station: line.Station, Attempt: 1, Purpose: pipeline.Setup}, view)
	h.FrameCounter = uint64(n + 1)
	return r.frame(h, counts), dots, nil
}

func (r *Renderer) drawDots(light *raster.Plane, t Target) []TargetDot {
	c := r.scene.Camera
	x0, y0 := float64(c.Width-1)/2+t.ShiftXPx, float64(c.Height-1)/2+t.ShiftYPx
	plate := pipeline.Planar{OriginX: x0, OriginY: y0, UMPerPx: c.UMPerPx, RotationDeg: t.RotationDeg}
	seen := pipeline.Distorted{Planar: plate, Lens: t.Lens(c)}
	scatter := stream(r.scene.Seed, "target", "scatter", strconv.Itoa(t.Columns))
	var out []TargetDot
	for row := range t.Rows {
		for column := range t.Columns {
			d := TargetDot{Column: column, Row: row, DiameterUM: t.DiametersUM[(row*t.Columns+column)%len(t.DiametersUM)]}
			u, v := (float64(column)-float64(t.Columns-1)/2)*t.PitchUM, -(float64(row)-float64(t.Rows-1)/2)*t.PitchUM
			d.XPx, d.YPx = seen.ToPixel(u, v)
			_, _, scale := seen.ToStation(d.XPx, d.YPx)
			brightness := t.brightness(d.DiameterUM) * math.Exp(t.Spread*scatter.NormFloat64())
			radius := d.DiameterUM / 2 / scale
			d.FluxDNPx = brightness * math.Pi * radius * radius
			if d.XPx < 0 || d.YPx < 0 || d.XPx > float64(c.Width-1) || d.YPx > float64(c.Height-1) {
				continue
			}
			p := newPatch(d.XPx, d.YPx, radius, blurReach*c.BlurPx+2)
			p.drawnFine(c.BlurPx, func(fine *patch) { fine.drawDisc(d.XPx, d.YPx, radius, float32(brightness)) })
			p.addTo(light)
			out = append(out, d)
		}
	}
	return out
}

// brightness returns that of a uniform dot whose flux, brightness times area, follows the law.
func (t Target) brightness(diameterUM float64) float64 {
	exponent, reference := t.FluxExponent, t.ReferenceUM
	if exponent == 0 {
		exponent = 2
	}
	if reference == 0 {
		reference = t.DiametersUM[0]
	}
	return t.BrightnessDN * math.Pow(diameterUM/reference, exponent-2)
}
