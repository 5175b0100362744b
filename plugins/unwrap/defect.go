package unwrap

import (
	"math"
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// find adds a defect for every blob of the flat picture, once.
func (st stage) find(item *pipeline.Item, g grid, signal, noise, snr *raster.Plane, mask *raster.Mask) {
	blobs := g.once(raster.Label(snr, float32(st.s.KLow), float32(st.s.KHigh)))
	if len(blobs) > pipeline.MaxDefects {
		blobs, item.Truncated = blobs[:pipeline.MaxDefects], true
	}
	m := raster.NewMeasurer(signal, noise, mask, blobs)
	defects := slices.Clone(item.Defects)
	for i, b := range blobs {
		defects = append(defects, st.defect(item, g, m.Measure(i), b.Spans))
	}
	item.Defects = defects
}

// once takes out the blobs that are seen whole elsewhere: those that begin in the
// repeated columns, and those at column 0 that are the rest of one running over the seam.
func (g grid) once(blobs []raster.Blob) []raster.Blob {
	over := raster.NewMask(g.columns+g.overlap, g.rows) // what runs over the seam, as seen from column 0
	for _, b := range blobs {
		if x0 := firstColumn(b); x0 > 0 && x0 < g.columns {
			for _, s := range b.Spans {
				over.FillSpans([]raster.Span{{Y: s.Y, X0: max(s.X0-g.columns, 0), X1: max(s.X1-g.columns, 0)}})
			}
		}
	}
	return slices.DeleteFunc(blobs, func(b raster.Blob) bool {
		x0 := firstColumn(b)
		return x0 >= g.columns || x0 == 0 && slices.ContainsFunc(b.Spans, func(s raster.Span) bool { return over.At(s.X0, s.Y) })
	})
}

func firstColumn(b raster.Blob) int {
	x0 := b.Spans[0].X0
	for _, s := range b.Spans {
		x0 = min(x0, s.X0)
	}
	return x0
}

// defect measures a blob on the surface: lengths by the µm of a column and of a row at
// its height, along and across its own long axis.
func (st stage) defect(item *pipeline.Item, g grid, b raster.Blemish, spans []raster.Span) pipeline.Defect {
	column, row := g.scales(b.Y)
	s, c := math.Sincos(b.Angle * math.Pi / 180)
	along, across := math.Hypot(c*column, s*row), math.Hypot(s*column, c*row)
	length, width := b.Length*along, b.Width*across
	angle := math.Atan2(s*row, c*column)
	if width > length {
		length, width, angle = width, length, math.Atan2(c*row, -s*column)
	}
	x, y := g.camera(b.X, b.Y)
	u, v, scale := g.ToStation(x, y)
	area := b.HalfArea * column * row
	d := pipeline.Defect{Kind: pipeline.Dig, View: item.View, Zone: "ring", Place: pipeline.Place{XPx: x, YPx: y, UUM: u, VUM: v},
		AreaPx: b.AreaPx, AreaUM2: area, LengthUM: length, WidthUM: width, DiameterUM: math.Sqrt(4 * area / math.Pi),
		LengthPx: length / scale, WidthPx: width / scale, DiameterPx: math.Sqrt(4*area/math.Pi) / scale,
		AngleDeg: g.cameraAngle(angle, x, y), Flux: b.Flux, PeakDN: b.Peak, PeakSigma: b.PeakSNR, SNR: b.SNR, Dark: b.Dark,
		Box: g.box(spans, item.Region.Mask()), EdgeDistanceUM: g.SlantUM/2 - math.Abs(v)}
	if length >= st.s.ScratchRatio*width {
		d.Kind = pipeline.Scratch
	}
	d.Saturated = reaches(item.Planes[FlatPlane].Pixels, spans, float32(item.Frames[0].Raw.Format.MaxCount()))
	for _, p := range b.Path {
		px, py := g.camera(p.X, p.Y)
		d.Path = append(d.Path, pipeline.Point{X: px, Y: py})
	}
	return d
}

// reaches reports whether a pixel of the spans is at the top of its range.
func reaches(p *raster.Plane, spans []raster.Span, top float32) bool {
	for _, s := range spans {
		if slices.Max(p.Row(s.Y)[s.X0:s.X1]) >= top {
			return true
		}
	}
	return false
}

// cameraAngle turns an angle on the flat picture, from the arc towards the outer edge,
// into one on the frame, from +x towards +y.
func (g grid) cameraAngle(flat, x, y float64) float64 {
	around := math.Atan2(y-g.CentreY, x-g.CentreX) + math.Pi/2 // the direction of growing angle
	deg := (around - flat) * 180 / math.Pi                     // outwards is 90° before that
	return deg - 180*math.Ceil((deg-90)/180)
}

// box is the frame's pixels that a blob of the flat picture covers.
func (g grid) box(spans []raster.Span, frame *raster.Mask) pipeline.Box {
	b := pipeline.Box{X0: frame.Width, Y0: frame.Height}
	for _, s := range spans {
		for column := s.X0; column < s.X1; column++ {
			x, y := g.camera(float64(column), float64(s.Y))
			b.X0, b.Y0 = min(b.X0, int(x)), min(b.Y0, int(y))
			b.X1, b.Y1 = max(b.X1, int(x)+2), max(b.Y1, int(y)+2)
		}
	}
	return pipeline.Box{X0: max(b.X0, 0), Y0: max(b.Y0, 0), X1: min(b.X1, frame.Width), Y1: min(b.Y1, frame.Height)}
}
