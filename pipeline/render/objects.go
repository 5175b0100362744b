package render

import (
	"math"
	"math/rand/v2"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// addObjects draws the unit's objects over the background and notes how each is seen.
// All are measured against the background alone, whatever else lies there.
func (st stage) addObjects(plane *raster.Plane) {
	patches := make([]*patch, len(st.unit.Objects))
	for i := range patches {
		o := &st.unit.Objects[i]
		patches[i] = st.patchOf(*o)
		s := Sighting{View: st.view.Name, AngleDeg: st.angleDeg(*o)}
		s.XPx, s.YPx = st.geometry.ToPixel(o.UUM, o.VUM)
		if patches[i] != nil {
			st.measure(&s, patches[i], plane)
		}
		o.see(s)
	}
	for _, p := range patches {
		if p != nil {
			p.addTo(plane)
		}
	}
}

// measure fills in the light of a sighting from what is drawn and what lies beneath.
func (st stage) measure(s *Sighting, p *patch, background *raster.Plane) {
	flux, peak, x, y := p.extreme(background.Width, background.Height)
	power := st.unit.lampPower(st.view.Name)
	reaches := power * st.scene.vignettingAt(st.view, float64(x), float64(y))
	s.PeakDN, s.FluxDNPx = peak*reaches, flux*reaches
	s.BackgroundDN = float64(background.At(x, y))*reaches + power*st.scene.strayAt(st.view, float64(x))
	s.SigmaDN = st.scene.Camera.noiseDN(s.BackgroundDN)
	s.PeakSigma = s.PeakDN / s.SigmaDN
}

// patchOf draws one object as the view sees it; nil where the view cannot see it.
func (st stage) patchOf(o Object) *patch {
	if st.view.Light == LightBack && o.Kind != pipeline.EdgeChip {
		return nil
	}
	x, y := st.geometry.ToPixel(o.UUM, o.VUM)
	scale := 1 / st.scene.Camera.UMPerPx
	p := newPatch(x, y, o.reachUM()*scale, blurReach*st.blur+2)
	value := float32(o.BrightnessDN * st.view.strength())
	switch o.Kind {
	case pipeline.Scratch:
		a := st.arcOf(o)
		p.drawArc(a, st.blur, value, st.light.along(a))
		return p
	case pipeline.Fibre: // round: it scatters to all sides
		p.drawArc(st.arcOf(o), st.blur, value, nil)
		return p
	case pipeline.Stain:
		p.drawStain(x, y, o.DiameterUM/2*scale, st.blur, value)
		return p
	}
	p.drawnFine(st.blur, func(fine *patch) {
		switch o.Kind {
		case pipeline.Particle:
			fine.drawShape(value, grain(o, x, y, o.DiameterUM/2*scale))
		case pipeline.EdgeChip:
			st.drawChip(fine, o, value)
		default:
			fine.drawDisc(x, y, o.DiameterUM/2*scale, value)
		}
	})
	return p
}

func (st stage) arcOf(o Object) arc {
	scale := 1 / st.scene.Camera.UMPerPx
	a := arc{bend: o.BendPerMM / 1000 / scale, halfLen: o.LengthUM / 2 * scale, halfWide: o.WidthUM / 2 * scale}
	a.x, a.y = st.geometry.ToPixel(o.UUM, o.VUM)
	sin, cos := math.Sincos(-o.AngleDeg * math.Pi / 180)
	a.alongX, a.alongY = st.toPx(cos, sin)
	a.acrossX, a.acrossY = st.toPx(-sin, cos)
	return a
}

// angleDeg returns the object's long axis in the view's pixels, from +x towards +y.
func (st stage) angleDeg(o Object) float64 {
	sin, cos := math.Sincos(-o.AngleDeg * math.Pi / 180)
	x, y := st.toPx(cos, sin)
	return foldDeg(math.Atan2(y, x) * 180 / math.Pi)
}

// drawStain adds a soft spot: exp(−(d/radius)⁴·ln 2), half as strong at its radius. A
// blur of sigma widens the radius as it widens a Gaussian of that half width.
func (p *patch) drawStain(x, y, radius, sigma float64, value float32) {
	wide := math.Sqrt(radius*radius + 2*math.Ln2*sigma*sigma)
	for py := range p.h {
		row := p.row(py)
		for px := range row {
			dx, dy := float64(p.x0+px)-x, float64(p.y0+py)-y
			d2 := (dx*dx + dy*dy) / (wide * wide)
			row[px] = value * float32(math.Exp(-d2*d2*math.Ln2))
		}
	}
}

// grain returns the outline of an irregular grain whose area is that of a circle of
// the radius.
func grain(o Object, x, y, radius float64) func(px, py float64) bool {
	outline := newOutline(o.shape)
	return func(px, py float64) bool {
		dx, dy := px-x, py-y
		d2 := dx*dx + dy*dy
		if d2 > irregular*irregular*radius*radius {
			return false
		}
		edge := radius * outline.at(math.Atan2(dy, dx))
		return d2 <= edge*edge
	}
}

// outline is a closed curve about the origin as radius by angle.
type outline struct{ cosines, sines [4]float64 }

func newOutline(seed uint64) outline {
	r := rand.New(rand.NewPCG(seed, 1))
	var o outline
	for k := range o.cosines {
		o.cosines[k] = 0.16 / float64(k+1) * (2*r.Float64() - 1)
		o.sines[k] = 0.16 / float64(k+1) * (2*r.Float64() - 1)
	}
	return o
}

// at returns the radius relative to that of the circle of equal area: a curve
// 1 + Σ aₖ cos + bₖ sin has the area π(1 + Σ(aₖ² + bₖ²)/2).
func (o outline) at(angle float64) float64 {
	r, square := 1.0, 1.0
	for k := range o.cosines {
		sin, cos := math.Sincos(float64(k+2) * angle)
		r += o.cosines[k]*cos + o.sines[k]*sin
		square += (o.cosines[k]*o.cosines[k] + o.sines[k]*o.sines[k]) / 2
	}
	return r / math.Sqrt(square)
}

// drawChip draws a half ellipse with a ragged outline that bites into the part's edge:
// bright in dark field, a notch in the silhouette.
func (st stage) drawChip(p *patch, o Object, value float32) {
	if st.view.Light == LightBack {
		value = float32(st.view.LevelDN)
	}
	scale := 1 / st.scene.Camera.UMPerPx
	ux, uy := st.toPx(o.UUM, o.VUM) // outwards
	ex, ey := st.x+ux*st.radius, st.y+uy*st.radius
	depth, half := o.WidthUM*scale, o.LengthUM/2*scale
	outline := newOutline(o.shape)
	deep, before, after := outline.halfExtent()
	p.drawShape(value, func(x, y float64) bool {
		if math.Hypot(x-st.x, y-st.y) > st.radius {
			return false
		}
		in := -((x-ex)*ux + (y-ey)*uy) / depth * deep
		along := ((y-ey)*ux-(x-ex)*uy)/half*(before+after)/2 + (after-before)/2
		return math.Hypot(in, along) <= outline.at(math.Atan2(in, along))
	})
}

// halfExtent returns how deep the upper half of the outline is, and how far it reaches
// along its base to either side.
func (o outline) halfExtent() (deep, before, after float64) {
	for i := range 181 {
		angle := math.Pi * float64(i) / 180
		sin, cos := math.Sincos(angle)
		r := o.at(angle)
		deep, before, after = max(deep, r*sin), max(before, -r*cos), max(after, r*cos)
	}
	return deep, before, after
}
