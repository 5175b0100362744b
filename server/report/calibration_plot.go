package report

import (
	"fmt"
	"html/template"
	"image/color"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate"
	"lapgate/pipeline/calibrate/dots"
	"lapgate/pipeline/calibrate/emva"
)

// roundTicks labels multiples of 1, 2 or 5 times a power of ten, three to ten of them.
type roundTicks struct{}

// Ticks implements plot.Ticker.
func (roundTicks) Ticks(low, high float64) []plot.Tick {
	if !(high > low) {
		return []plot.Tick{{Value: low, Label: fmt.Sprintf("%.4g", low)}}
	}
	step := math.Pow(10, math.Floor(math.Log10(high-low)))
	switch n := (high - low) / step; {
	case n < 1.6:
		step /= 5
	case n < 4:
		step /= 2
	}
	var out []plot.Tick
	for v := math.Ceil(low/step) * step; v <= high+step/1e6; v += step {
		if math.Abs(v) < step/1e6 {
			v = 0
		}
		out = append(out, plot.Tick{Value: v, Label: fmt.Sprintf("%.6g", v)})
	}
	return out
}

func newRoundPlot(x, y string) *plot.Plot {
	p := newPlot(x, y)
	p.X.Tick.Marker, p.Y.Tick.Marker = roundTicks{}, roundTicks{}
	return p
}

// addDots adds points of one colour, hollow or filled.
func addDots(p *plot.Plot, name string, at plotter.XYs, c color.RGBA, hollow bool) error {
	if len(at) == 0 {
		return nil
	}
	s, err := plotter.NewScatter(at)
	if err != nil {
		return err
	}
	s.GlyphStyle = draw.GlyphStyle{Color: c, Radius: vg.Points(3), Shape: draw.CircleGlyph{}}
	if hollow {
		s.Shape = draw.RingGlyph{}
	}
	p.Add(s)
	if name != "" {
		p.Legend.Add(name, s)
	}
	return nil
}

func addLine(p *plot.Plot, name string, at plotter.XYs, c color.Color, dashed bool) error {
	l, err := plotter.NewLine(at)
	if err != nil {
		return err
	}
	l.Color, l.Width = c, vg.Points(1.5)
	if dashed {
		l.Dashes = []vg.Length{vg.Points(5), vg.Points(3)}
	}
	p.Add(l)
	if name != "" {
		p.Legend.Add(name, l)
	}
	return nil
}

func legendTopLeft(p *plot.Plot) {
	p.Legend.Top, p.Legend.Left = true, true
	p.Legend.XOffs, p.Legend.YOffs = vg.Points(8), -vg.Points(4)
	p.Legend.ThumbnailWidth = vg.Points(18)
	p.Legend.Padding = vg.Points(2)
}

// drawTransfer draws temporal variance against mean, both above dark, with the line of
// slope K: of the ramp, or else of groups of tiles of the response frames. It is empty
// where there is neither.
func drawTransfer(m calibrate.Made) (template.HTML, error) {
	p := newRoundPlot("mean above dark, DN", "temporal variance above dark, DN²")
	most, err := addTransferPoints(p, m.Provenance)
	if err != nil || most == 0 {
		return "", err
	}
	k := m.Calibration.Noise.GainDNPerE
	end := most
	if r := m.Provenance.Ramp; r != nil {
		end = emva.LinearShare * r.Figures.SaturationDN
		if err := addLine(p, "", plotter.XYs{{X: end, Y: k * end}, {X: most, Y: k * most}}, paler(lineColour(1), 0.5), true); err != nil {
			return "", err
		}
	}
	if err := addLine(p, fmt.Sprintf("K = %.4g DN/e⁻", k), plotter.XYs{{}, {X: end, Y: k * end}}, lineColour(1), false); err != nil {
		return "", err
	}
	p.X.Max, p.Y.Max = 1.03*most, 1.12*max(p.Y.Max, k*end)
	p.X.Min, p.Y.Min = 0, min(p.Y.Min, 0)-0.03*p.Y.Max // saturated steps have less noise than the dark
	legendTopLeft(p)
	return svgOf(p, 18*vg.Centimeter, 10*vg.Centimeter)
}

func addTransferPoints(p *plot.Plot, from calibrate.Provenance) (most float64, err error) {
	if from.Ramp == nil {
		var at plotter.XYs
		for _, l := range from.PhotonTransfer {
			at, most = append(at, plotter.XY{X: l.MeanDN, Y: l.VarianceDN2}), max(most, l.MeanDN)
		}
		return most, addDots(p, "tiles of the response frames, by brightness", at, lineColour(0), false)
	}
	var used, beyond plotter.XYs
	for _, s := range from.Ramp.Points {
		x := s.Bright.MeanDN - s.Dark.MeanDN
		at := plotter.XY{X: x, Y: s.Bright.VarianceDN2 - s.Dark.VarianceDN2}
		if x <= emva.LinearShare*from.Ramp.Figures.SaturationDN {
			used = append(used, at)
		} else {
			beyond = append(beyond, at)
		}
		most = max(most, x)
	}
	if err := addDots(p, "steps fitted, to 70 % of saturation", used, lineColour(0), false); err != nil {
		return 0, err
	}
	return most, addDots(p, "steps beyond", beyond, lineColour(0), true)
}

// drawLinearity draws how far each step lies off the line through the steps between 5
// and 95 % of saturation.
func drawLinearity(r *calibrate.Ramp) (template.HTML, error) {
	x, deviation := emva.Deviations(r.Points, r.Figures)
	if len(x) == 0 {
		return "", nil
	}
	name := "photons per pixel"
	if r.Figures.Responsivity == 0 {
		name = "exposure, µs"
	}
	p := newRoundPlot(name, "deviation from a line, %")
	at := make(plotter.XYs, len(x))
	for i := range x {
		at[i] = plotter.XY{X: x[i], Y: deviation[i]}
	}
	if err := addLine(p, "", plotter.XYs{{X: 0, Y: 0}, {X: 1.05 * x[len(x)-1], Y: 0}}, lineColour(6), false); err != nil {
		return "", err
	}
	if err := addDots(p, "", at, lineColour(0), false); err != nil {
		return "", err
	}
	reach := 1.2 * max(math.Abs(r.Figures.LinearityLow), math.Abs(r.Figures.LinearityHigh), 0.05)
	p.X.Min, p.Y.Min, p.Y.Max = 0, -reach, reach
	return svgOf(p, 18*vg.Centimeter, 7*vg.Centimeter)
}

// drawResiduals draws each dot's residual as a line from its place, lengthened so that
// they can be seen; the text says by how much.
func drawResiduals(t *dots.Scale, width, height int) (template.HTML, string, error) {
	p := newRoundPlot("x, px", "y, px")
	longest := 0.0
	for _, r := range t.Residuals {
		longest = max(longest, math.Hypot(r.DX, r.DY))
	}
	by := 1.0
	if longest > 0 {
		by = math.Pow(10, math.Floor(math.Log10(0.06*float64(width)/longest)))
	}
	var at plotter.XYs
	for _, r := range t.Residuals {
		at = append(at, plotter.XY{X: r.X, Y: -r.Y})
		if err := addLine(p, "", plotter.XYs{{X: r.X, Y: -r.Y}, {X: r.X + by*r.DX, Y: -r.Y - by*r.DY}}, lineColour(1), false); err != nil {
			return "", "", err
		}
	}
	s, err := plotter.NewScatter(at)
	if err != nil {
		return "", "", err
	}
	s.GlyphStyle = draw.GlyphStyle{Color: lineColour(0), Radius: vg.Points(1.2), Shape: draw.CircleGlyph{}}
	p.Add(s)
	p.X.Min, p.X.Max, p.Y.Min, p.Y.Max = 0, float64(width), -float64(height), 0
	p.Y.Tick.Marker = downTicks{}
	svg, err := svgOf(p, 18*vg.Centimeter, vg.Length(18*float64(height)/float64(width)+1)*vg.Centimeter)
	return svg, fmt.Sprintf("%.0f", by), err
}

// downTicks are roundTicks of an axis that was turned over to run downwards.
type downTicks struct{}

// Ticks implements plot.Ticker.
func (downTicks) Ticks(low, high float64) []plot.Tick {
	ticks := roundTicks{}.Ticks(low, high)
	for i := range ticks {
		ticks[i].Label = fmt.Sprintf("%.6g", math.Abs(ticks[i].Value))
	}
	return ticks
}

// drawSizing draws flux against diameter with the curve and one residual on both sides.
func drawSizing(s pipeline.Sizing, known []dots.Known) (template.HTML, error) {
	p := newPlot("diameter, µm", "flux, DN·px")
	p.X.Scale, p.Y.Scale = plot.LogScale{}, plot.LogScale{}
	p.X.Tick.Marker, p.Y.Tick.Marker = plainLogTicks{}, plainLogTicks{}
	at := make(plotter.XYs, len(known))
	for i, k := range known {
		at[i] = plotter.XY{X: k.DiameterUM, Y: k.FluxDNPx}
	}
	if err := addDots(p, "dots of the target", at, lineColour(0), true); err != nil {
		return "", err
	}
	for _, c := range []struct {
		name   string
		factor float64
	}{{fmt.Sprintf("flux ∝ diameter^%.2f", s.Exponent), 1}, {"one residual", 1 + s.Residual}, {"", 1 / (1 + s.Residual)}} {
		line := plotter.XYs{{X: s.MinUM, Y: s.FluxDNPx * math.Pow(s.MinUM*c.factor/s.ReferenceUM, s.Exponent)},
			{X: s.MaxUM, Y: s.FluxDNPx * math.Pow(s.MaxUM*c.factor/s.ReferenceUM, s.Exponent)}}
		if err := addLine(p, c.name, line, lineColour(1), c.factor != 1); err != nil {
			return "", err
		}
	}
	p.X.Min, p.X.Max = 0.85*s.MinUM, 1.15*s.MaxUM
	legendTopLeft(p)
	return svgOf(p, 18*vg.Centimeter, 10*vg.Centimeter)
}
