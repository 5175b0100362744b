package render

import (
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Notch is a half ellipse cut into the part's edge as a datum: it tells how the part
// lies turned. Its middle lies on the part's own +u axis. Zero depth = none.
type Notch struct {
	DepthUM float64 `yaml:"depth_um"` // inwards from the edge
	WidthUM float64 `yaml:"width_um"` // along the edge
}

func (p Part) checkNotch() error {
	return firstBad(within("part.notch.depth_um", p.Notch.DepthUM, 0, p.DiameterMM*250), within("part.notch.width_um", p.Notch.WidthUM, 0, p.DiameterMM*500))
}

// notch cuts the notch out of what is drawn; what is behind the part shows there.
func (st stage) notch(plane *raster.Plane) {
	n := st.scene.Part.Notch
	if n.DepthUM == 0 || n.WidthUM == 0 {
		return
	}
	sin, cos := math.Sincos(st.unit.PartAngleDeg * math.Pi / 180)
	ux, uy := st.toPx(cos, sin)
	ex, ey := st.x+ux*st.radius, st.y+uy*st.radius
	scale := 1 / st.scene.Camera.UMPerPx
	depth, half := n.DepthUM*scale, n.WidthUM/2*scale
	p := newPatch(ex, ey, max(depth, half), blurReach*st.blur+8)
	p.drawnFine(st.blur, func(fine *patch) {
		fine.drawShape(1, func(x, y float64) bool {
			in, along := (x-ex)*ux+(y-ey)*uy, (y-ey)*ux-(x-ex)*uy
			return in > 0 && math.Abs(along) < half || math.Hypot(in/depth, along/half) < 1
		})
	})
	behind := float32(st.view.FixtureDN)
	if st.view.Light == LightBack {
		behind = float32(st.view.LevelDN)
	}
	y0, y1, x0, x1 := p.inFrame(plane.Width, plane.Height)
	for y := y0; y < y1; y++ {
		row, out := p.row(y), plane.Row(p.y0+y)
		for x := x0; x < x1; x++ {
			k := min(row[x], 1)
			out[p.x0+x] = out[p.x0+x]*(1-k) + behind*k
		}
	}
}

// Stand puts the unit in the middle of the frame at an angle, in place of the place that
// was drawn for it: for tests of what finds the angle.
func (u *Unit) Stand(angleDeg float64) {
	u.ShiftXPx, u.ShiftYPx = 0, 0
	turn := (angleDeg - u.PartAngleDeg)
	sin, cos := math.Sincos(angleDeg * math.Pi / 180)
	u.PartAngleDeg = angleDeg
	for i := range u.Objects {
		o := &u.Objects[i]
		o.UUM, o.VUM = cos*o.PartUUM-sin*o.PartVUM, sin*o.PartUUM+cos*o.PartVUM
		o.AngleDeg = foldDeg(o.AngleDeg - turn)
	}
}

// Add puts an object onto the part as it lies; ID and the part's coordinates are filled in.
func (u *Unit) Add(o Object) {
	sin, cos := math.Sincos(u.PartAngleDeg * math.Pi / 180)
	o.ID = len(u.Objects) + 1
	o.PartUUM, o.PartVUM = cos*o.UUM+sin*o.VUM, cos*o.VUM-sin*o.UUM
	if o.Kind == pipeline.EdgeChip || o.Kind == pipeline.Particle {
		o.shape = uint64(o.ID)
	}
	u.Objects = append(u.Objects, o)
}
