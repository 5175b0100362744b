package render

import "math"

// layLines is the lay as one view sees it.
type layLines struct {
	profile    []float32 // nil = no lay
	concentric bool
	reach      float32 // px before the middle of the profile
	nx, ny     float32 // normal of straight lines, px
	light      bar
}

// lay draws the lay of the unit; its profile is the same in every view.
func (st stage) lay(r *Renderer) layLines {
	u, l := st.unit, st.unit.Process.Lay
	out := layLines{light: st.light}
	if !l.drawn() || u.LayDN == 0 {
		return out
	}
	reach := 1.1 * st.radius
	rms := u.LayDN * st.view.strength()
	out.concentric, out.reach = l.Pattern == LayConcentric, float32(reach)
	if !out.concentric {
		// the lines lie along u of the part
		x, y := st.toPx(-math.Sin(u.PartAngleDeg*math.Pi/180), math.Cos(u.PartAngleDeg*math.Pi/180))
		out.nx, out.ny = float32(x), float32(y)
		rms *= st.light.weight(x, y)
	}
	out.profile = layProfile(r.unitStream(*u, "lay"), rms, l.PeriodUM/st.scene.Camera.UMPerPx, st.blur, reach, radialStep)
	return out
}

// at returns the lay's light at (dx, dy) px from the part's centre.
func (l layLines) at(dx, dy, distance float32) float32 {
	if l.concentric {
		i := min(int((distance+l.reach)*(1/radialStep)+0.5), len(l.profile)-1)
		return l.profile[i] * l.light.radialWeight(dx, dy, distance)
	}
	i := int((dx*l.nx+dy*l.ny+l.reach)*(1/radialStep) + 0.5)
	return l.profile[min(max(i, 0), len(l.profile)-1)]
}

// radialWeight is weight for lines whose normal is the radius.
func (b bar) radialWeight(dx, dy, distance float32) float32 {
	if !b.oneSided {
		return 1
	}
	if distance == 0 {
		return float32(b.floor)
	}
	c := (dx*float32(b.x) + dy*float32(b.y)) / distance
	w, c2 := float32(1), c*c
	for range b.halves {
		w *= c2
	}
	return float32(b.floor) + float32(1-b.floor)*w
}

// toPx returns the unit vector in pixels of a direction (u, v) on the station.
func (st stage) toPx(u, v float64) (x, y float64) {
	x0, y0 := st.geometry.ToPixel(0, 0)
	x1, y1 := st.geometry.ToPixel(1000*u, 1000*v)
	n := math.Hypot(x1-x0, y1-y0)
	return (x1 - x0) / n, (y1 - y0) / n
}
