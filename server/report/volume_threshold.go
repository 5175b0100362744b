package report

import (
	"html/template"
	"image/color"
	"slices"

	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"

	"lapgate/server/volume"
)

// drawVolumeThreshold draws the cost per good unit against the setting, with
// its band, the drawing's limit and the least-cost allowed setting.
func drawVolumeThreshold(r *volume.Result) (template.HTML, error) {
	t := r.Threshold
	p := newPlot("setting, "+t.Unit, r.Currency+" per good unit")
	var line, low, high plotter.XYs
	for _, s := range t.Settings {
		line = append(line, plotter.XY{X: s.Setting, Y: float64(s.Cost)})
		low = append(low, plotter.XY{X: s.Setting, Y: float64(s.Low)})
		high = append(high, plotter.XY{X: s.Setting, Y: float64(s.High)})
	}
	slices.Reverse(high)
	band, err := plotter.NewPolygon(append(slices.Clone(low), high...))
	if err != nil {
		return "", err
	}
	c := lineColour(0)
	band.Color, band.LineStyle.Width = color.NRGBA{c.R, c.G, c.B, 50}, 0
	l, points, err := plotter.NewLinePoints(line)
	if err != nil {
		return "", err
	}
	l.Color, l.Width, points.Color = c, vg.Points(1.6), c
	p.Add(band, l, points)
	p.Legend.Add("cost and its interval", swatch{c})
	limit, err := plotter.NewLine(plotter.XYs{{X: t.DrawingLimit, Y: p.Y.Min}, {X: t.DrawingLimit, Y: p.Y.Max}})
	if err != nil {
		return "", err
	}
	limit.Color, limit.Width, limit.Dashes = lineColour(1), vg.Points(1.4), []vg.Length{vg.Points(5), vg.Points(3)}
	p.Add(limit)
	p.Legend.Add("the drawing's limit", swatch{lineColour(1)})
	p.Legend.Top, p.Legend.Left = true, true
	p.Legend.XOffs = vg.Points(8)
	return svgOf(p, 18*vg.Centimeter, 9*vg.Centimeter)
}
