package scratches

import (
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/lines"
)

// defect turns a line into a defect: with its zone, its place on the station, its sizes in
// µm at the scale where it lies, and its heights in DN by the noise along it. Its peak in DN
// is how high the profile across it is in the mean along it, not its brightest pixel, which
// is noise; that in sigmas is of its strongest 5 px. SNR is the sum along the whole line over the
// noise of its pixels, as the flux of a blob over its own; how lay scatters is not in it.
func defect(item *pipeline.Item, l lines.Line) pipeline.Defect {
	middle := halfway(l.Path, l.Length)
	u, v, scale := item.Geometry.ToStation(middle.X, middle.Y)
	noise := noiseAlong(item.Grid, l.Path)
	area := l.Length * l.Width
	d := pipeline.Defect{
		Kind: pipeline.Scratch, View: item.View, Place: pipeline.Place{XPx: middle.X, YPx: middle.Y, UUM: u, VUM: v},
		AreaPx: int(math.Round(area)), AreaUM2: area * scale * scale,
		LengthUM: l.Length * scale, WidthUM: l.Width * scale, DiameterUM: 2 * math.Sqrt(area/math.Pi) * scale,
		LengthPx: l.Length, WidthPx: l.Width, DiameterPx: 2 * math.Sqrt(area/math.Pi),
		AngleDeg: l.Angle, Flux: l.Flux * noise, PeakDN: l.Contrast * noise, PeakSigma: l.Peak, SNR: l.White, Dark: l.Dark,
		Box: boxOf(item, l),
	}
	for _, p := range l.Path {
		d.Path = append(d.Path, pipeline.Point(p))
	}
	d.Saturated = saturated(item.SaturatedAt, l)
	zone, ok := item.Region.ZoneAt(middle.X, middle.Y)
	if !ok && len(l.Path) > 0 { // the middle of an arc's path may lie beside the region
		zone, _ = item.Region.ZoneAt(l.Path[0].X, l.Path[0].Y)
	}
	d.Zone = zone.Name
	if zone.EdgeDistancePx != nil {
		d.EdgeDistanceUM = zone.EdgeDistancePx(middle.X, middle.Y) * scale
	}
	return d
}

// halfway returns the point half of a path's length along it.
func halfway(path []raster.Point, length float64) raster.Point {
	left := length / 2
	for i := 1; i < len(path); i++ {
		p, q := path[i-1], path[i]
		d := math.Hypot(q.X-p.X, q.Y-p.Y)
		if d > 0 && d >= left {
			t := left / d
			return raster.Point{X: p.X + t*(q.X-p.X), Y: p.Y + t*(q.Y-p.Y)}
		}
		left -= d
	}
	return path[len(path)-1]
}

// noiseAlong returns the mean noise of the cells along a path, DN.
func noiseAlong(g *raster.Grid, path []raster.Point) float64 {
	sum, n := 0., 0.
	for i := 1; i < len(path); i++ {
		p, q := path[i-1], path[i]
		d := math.Hypot(q.X-p.X, q.Y-p.Y)
		for k := range int(d/16) + 1 {
			t := (float64(k) + 0.5) / float64(int(d/16)+1)
			share := d / float64(int(d/16)+1)
			sum, n = sum+share*noiseAt(g, raster.Point{X: p.X + t*(q.X-p.X), Y: p.Y + t*(q.Y-p.Y)}), n+share
		}
	}
	return sum / n
}

// noiseAt returns the noise of the cell that holds a point, DN.
func noiseAt(g *raster.Grid, p raster.Point) float64 {
	column := min(max(int(p.X)/g.CellPx, 0), g.Columns-1)
	row := min(max(int(p.Y)/g.CellPx, 0), g.Rows-1)
	return g.Noise[row*g.Columns+column]
}

// boxOf is around all pixels of the line, within the frame.
func boxOf(item *pipeline.Item, l lines.Line) pipeline.Box {
	x0, y0, x1, y1 := math.Inf(1), math.Inf(1), math.Inf(-1), math.Inf(-1)
	for _, p := range l.Path {
		x0, y0, x1, y1 = min(x0, p.X), min(y0, p.Y), max(x1, p.X), max(y1, p.Y)
	}
	at := func(v float64) int { return int(math.Floor(v + 0.5)) }
	w := l.Width / 2
	width, height := item.Region.Size()
	return pipeline.Box{X0: max(at(x0-w), 0), Y0: max(at(y0-w), 0), X1: min(at(x1+w)+1, width), Y1: min(at(y1+w)+1, height)}
}

// saturated reports whether a saturated pixel lies on the line or beside it.
func saturated(m *raster.Mask, l lines.Line) bool {
	if m == nil {
		return false
	}
	for i := 1; i < len(l.Path); i++ {
		p, q := l.Path[i-1], l.Path[i]
		n := int(math.Hypot(q.X-p.X, q.Y-p.Y)) + 1
		for k := range n + 1 {
			t := float64(k) / float64(n)
			x, y := int(math.Round(p.X+t*(q.X-p.X))), int(math.Round(p.Y+t*(q.Y-p.Y)))
			for j := range 9 {
				if m.At(x+j%3-1, y+j/3-1) {
					return true
				}
			}
		}
	}
	return false
}
