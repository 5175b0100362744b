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
	PitchUM      float64
	Columns      int
	Rows         int
	DiametersUM  []float64           // by number of the dot, row by row from the top; dealt out again from the first where there are fewer
	BackgroundDN float64             // of the plate
	BrightnessDN float64             // of a dot of ReferenceUM above it; below 0: dark dots
	FluxExponent float64             // a dot's flux grows with its diameter to this power; 0 is read as 2
	ReferenceUM  float64             // 0 is read as the first diameter
	Spread       float64             // relative scatter of the dots' flux about that law
	RotationDeg  float64             // of the plate
	ShiftXPx     float64             // of its middle from the frame's
	ShiftYPx     float64             //
	Lens         pipeline.Distortion // NormPx 0 = none
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
	return firstBad(within("target columns", float64(t.Columns), 1, 1000), within("target rows", float64(t.Rows), 1, 1000),
		within("target flux exponent", t.FluxExponent, 0, 8), within("target spread", t.Spread, 0, 1))
}

// TargetFrame takes the n-th frame of a target under a view's light, n from 0, and
// returns what is true of the dots whose middle lies in it.
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
	dots := r.drawDots(light, t)
	counts := r.sensor.expose(light, r.maps[i], 1, r.sensor.frameStream("target", view, n))
	line := r.scene.Lines[0]
	h := r.header(pipeline.Identity{Part: r.scene.Part.Number, Unit: "target", Line: line.Name, Station: line.Station, Attempt: 1, Purpose: pipeline.Setup}, view)
	h.FrameCounter = uint64(n + 1)
	return r.frame(h, counts), dots, nil
}

func (r *Renderer) drawDots(light *raster.Plane, t Target) []TargetDot {
	c := r.scene.Camera
	x0, y0 := float64(c.Width-1)/2+t.ShiftXPx, float64(c.Height-1)/2+t.ShiftYPx
	plate := pipeline.Planar{OriginX: x0, OriginY: y0, UMPerPx: c.UMPerPx, RotationDeg: t.RotationDeg}
	scatter := stream(r.scene.Seed, "target", "scatter", strconv.Itoa(t.Columns))
	var out []TargetDot
	for row := range t.Rows {
		for column := range t.Columns {
			d := TargetDot{Column: column, Row: row, DiameterUM: t.DiametersUM[(row*t.Columns+column)%len(t.DiametersUM)]}
			u, v := (float64(column)-float64(t.Columns-1)/2)*t.PitchUM, -(float64(row)-float64(t.Rows-1)/2)*t.PitchUM
			scale := c.UMPerPx
			d.XPx, d.YPx = plate.ToPixel(u, v)
			if t.Lens.NormPx > 0 {
				lens := pipeline.Distorted{Planar: plate, Lens: t.Lens}
				d.XPx, d.YPx = lens.ToPixel(u, v)
				_, _, scale = lens.ToStation(d.XPx, d.YPx)
			}
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
