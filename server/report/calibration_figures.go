package report

import (
	"fmt"
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate"
	"lapgate/pipeline/calibrate/dots"
	"lapgate/pipeline/calibrate/emva"
)

// calibrationFigures gathers all figures with their units; what was not measured is left out.
func calibrationFigures(m calibrate.Made) []figureGroup {
	c, p := m.Calibration, m.Provenance
	groups := []figureGroup{{"Camera settings that frames must match", captureFigures(c)}, {"Noise", noiseFigures(m)}}
	if p.Ramp != nil {
		groups = append(groups, figureGroup{"Ramp, by EMVA Standard 1288", rampFigures(p.Ramp)})
	}
	groups = append(groups, figureGroup{"Fixed pattern", patternFigures(m)}, figureGroup{"Scale and distortion", scaleFigures(c, p.Target)})
	if c.Sizing != nil {
		groups = append(groups, figureGroup{"Sizing by flux", sizingFigures(*c.Sizing)})
	}
	if rows := referenceFigures(c); len(rows) > 0 {
		groups = append(groups, figureGroup{"References for drift", rows})
	}
	return groups
}

func number(format string, v float64) string {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return "lost in the noise"
	}
	return fmt.Sprintf(format, v)
}

func captureFigures(c *pipeline.Calibration) []figureRow {
	k := c.Capture
	rows := []figureRow{{"frame", fmt.Sprintf("%d × %d", k.Width, k.Height), "px", k.Format.String()},
		{"exposure", fmt.Sprintf("%g", k.ExposureUS), "µs", ""}, {"gain", fmt.Sprintf("%g", k.GainDB), "dB", ""},
		{"black level", fmt.Sprintf("%g", k.BlackLevel), "DN", ""},
		{"read-out offset, binning", fmt.Sprintf("(%d, %d), %d × %d", k.OffsetX, k.OffsetY, max(k.BinningX, 1), max(k.BinningY, 1)), "px", ""}}
	if s := c.Sensor; s != nil {
		rows = append(rows, figureRow{"camera temperature", fmt.Sprintf("%.1f", s.MeanC), "°C", fmt.Sprintf("%.1f to %.1f in %d frames", s.LowC, s.HighC, s.Frames)})
	}
	return rows
}

func noiseFigures(m calibrate.Made) []figureRow {
	n, p := m.Calibration.Noise, m.Provenance
	rows := []figureRow{{"temporal dark noise σ_d", number("%.3f", n.DarkDN), "DN", "with quantisation"}}
	if n.GainDNPerE > 0 {
		note, uncertainty := fmt.Sprintf("from %d tiles of the response frames", p.GainLevels), ""
		if p.Ramp != nil {
			note, uncertainty = fmt.Sprintf("from %d steps of the ramp", p.GainLevels), fmt.Sprintf(" ± %.2g", p.Ramp.Figures.GainU)
		}
		rows = append(rows, figureRow{"temporal dark noise σ_d", number("%.2f", calibrate.DarkNoiseE(n)), "e⁻", "without quantisation"},
			figureRow{"system gain K", number("%.4g", n.GainDNPerE) + uncertainty, "DN/e⁻", note})
	}
	if p.ResponseGain > 0 {
		rows = append(rows, figureRow{"K by the response frames", number("%.4g", p.ResponseGain), "DN/e⁻", "for comparison"})
	}
	return rows
}

func rampFigures(r *calibrate.Ramp) []figureRow {
	f := r.Figures
	ratio := func(name string, v float64, note string) figureRow {
		return figureRow{name, fmt.Sprintf("%.1f = %.2f dB = %.2f bit", v, emva.Decibels(v), emva.Bits(v)), "", note}
	}
	var rows []figureRow
	if f.Efficiency > 0 {
		rows = append(rows, figureRow{"quantum efficiency η", number("%.1f", 100*f.Efficiency), "%", "R / K"},
			figureRow{"responsivity R", number("%.4g", f.Responsivity), "DN/photon", ""})
	}
	peak := "at the peak of the temporal variance"
	if !f.SaturationReached {
		peak = "brightest step; the ramp ends before saturation"
	}
	rows = append(rows, figureRow{"saturation", number("%.0f", f.SaturationE), "e⁻", peak}, figureRow{"saturation above dark", number("%.0f", f.SaturationDN), "DN", ""})
	if f.Efficiency > 0 {
		rows = append(rows, figureRow{"saturation", number("%.0f", f.SaturationPhotons), "photons", ""},
			figureRow{"absolute sensitivity threshold", number("%.2f", f.ThresholdPhotons), "photons", "SNR 1"})
	}
	rows = append(rows, figureRow{"absolute sensitivity threshold", number("%.2f", f.ThresholdE), "e⁻", "SNR 1"},
		ratio("SNR max", f.SNRMax, ""), ratio("dynamic range", f.DynamicRange, ""))
	if f.LinearityLevels > 0 {
		rows = append(rows, figureRow{"linearity error", fmt.Sprintf("%.2f to %+.2f", f.LinearityLow, f.LinearityHigh), "%", fmt.Sprintf("%d steps between 5 and 95 %% of saturation", f.LinearityLevels)})
	}
	note := fmt.Sprintf("pair of step %d, at %.0f %% of saturation", r.HalfStep+1, 100*(r.Bright.MeanDN-r.Dark.MeanDN)/f.SaturationDN)
	return append(rows, figureRow{"DSNU", number("%.2f", emva.DSNU(r.Dark.VarianceDN2, f.GainDNPerE)), "e⁻", note},
		figureRow{"PRNU", number("%.2f", emva.PRNU(r.Bright.VarianceDN2, r.Dark.VarianceDN2, r.Bright.MeanDN, r.Dark.MeanDN)), "%", note + "; light fall-off counts"})
}

// patternFigures are of the calibration's own frames, temporal noise taken out by the
// stack variance correction.
func patternFigures(m calibrate.Made) []figureRow {
	p := m.Provenance
	var rows []figureRow
	if d := p.DarkPattern; d != nil {
		note := fmt.Sprintf("%d dark frames, bad pixels too", d.Frames)
		rows = append(rows, figureRow{"dark pattern", number("%.3f", math.Sqrt(d.VarianceDN2)), "DN", note},
			figureRow{"dark pattern against 5 × 5 neighbours", number("%.3f", math.Sqrt(d.LocalDN2)), "DN", note},
			figureRow{"its columns, rows, pixels", split(*d), "DN", ""})
		if k := m.Calibration.Noise.GainDNPerE; k > 0 {
			rows = append(rows, figureRow{"DSNU", number("%.2f", emva.DSNU(d.VarianceDN2, k)), "e⁻", note})
		}
	}
	if b, d := p.ResponsePattern, p.DarkPattern; b != nil && d != nil {
		note := fmt.Sprintf("%d response frames at %.0f DN above dark", b.Frames, b.MeanDN-d.MeanDN)
		rows = append(rows, figureRow{"response pattern", number("%.2f", emva.PRNU(b.VarianceDN2, d.VarianceDN2, b.MeanDN, d.MeanDN)), "%", note + "; light fall-off counts, so this is no PRNU unless the light is even"},
			figureRow{"response pattern against 5 × 5 neighbours", number("%.2f", emva.PRNU(b.LocalDN2, d.LocalDN2, b.MeanDN, d.MeanDN)), "%", "from pixel to pixel, fall-off taken out"})
	}
	return append(rows, figureRow{"bad pixels", fmt.Sprint(len(m.Calibration.BadPixels)), "", "replaced in every frame"})
}

func split(s emva.Spatial) string {
	root := func(v float64) string {
		if v < 0 {
			return "0"
		}
		return fmt.Sprintf("%.3f", math.Sqrt(v))
	}
	return root(s.ColumnDN2) + ", " + root(s.RowDN2) + ", " + root(s.PixelDN2)
}

func scaleFigures(c *pipeline.Calibration, t *dots.Scale) []figureRow {
	value := fmt.Sprintf("%.6g", c.Scale.UMPerPx)
	if c.Scale.UncertaintyUM > 0 {
		value = fmt.Sprintf("%.5f ± %.2g", c.Scale.UMPerPx, c.Scale.UncertaintyUM)
	}
	rows := []figureRow{{"scale", value, "µm/px", c.Scale.Source}}
	if t == nil {
		return rows
	}
	rows = append(rows,
		figureRow{"its parts: fit, certificate", fmt.Sprintf("%.2g, %.2g", t.FitUncertaintyUM, t.CertificateUncertaintyUM), "µm/px", "standard uncertainties"},
		figureRow{"pitch of the target", fmt.Sprintf("%g ± %g", t.Certificate.PitchUM, t.Certificate.UncertaintyUM), "µm", fmt.Sprintf("target %s, certificate of %s", t.Certificate.Serial, t.Certificate.Date)},
		figureRow{"dots", fmt.Sprintf("%d in %d frames", t.Dots, t.Frames), "", fmt.Sprintf("%d left out; they span %.0f %% of the field", t.LeftOut, 100*t.FieldShare)},
		figureRow{"residual, root mean square", fmt.Sprintf("%.4f", t.RMSPx), "px", fmt.Sprintf("largest %.3f px; without distortion %.4f px", t.MaxPx, t.PlainRMSPx)})
	d := t.Distortion
	if d == nil {
		return append(rows, figureRow{"distortion", "none that the dots show", "", t.Method})
	}
	corner := cornerShift(*d, c.Capture)
	return append(rows, figureRow{"distortion k1, k2", fmt.Sprintf("%.5f ± %.1g, %.5f ± %.1g", d.K1, t.K1Uncertainty, d.K2, t.K2Uncertainty), "", t.Method},
		figureRow{"its centre, and radius of ρ = 1", fmt.Sprintf("(%.1f, %.1f), %.1f", d.CentreX, d.CentreY, d.NormPx), "px", ""},
		figureRow{"largest shift in a corner", fmt.Sprintf("%.2f", corner), "px", "what straight lines bend by"})
}

func cornerShift(d pipeline.Distortion, k pipeline.Capture) float64 {
	most := 0.0
	for _, p := range [][2]float64{{0, 0}, {float64(k.Width - 1), 0}, {0, float64(k.Height - 1)}, {float64(k.Width - 1), float64(k.Height - 1)}} {
		x, y := d.Ideal(p[0], p[1])
		most = max(most, math.Hypot(x-p[0], y-p[1]))
	}
	return most
}

func sizingFigures(s pipeline.Sizing) []figureRow {
	return []figureRow{
		{"exponent of flux against diameter", fmt.Sprintf("%.3f ± %.3f", s.Exponent, s.ExponentUncertainty), "", fmt.Sprintf("%d dots", s.Dots)},
		{"flux at the reference diameter", fmt.Sprintf("%.4g at %.4g µm", s.FluxDNPx, s.ReferenceUM), "DN·px", ""},
		{"range", fmt.Sprintf("%g to %g", s.MinUM, s.MaxUM), "µm", "outside it flux sizes nothing"},
		{"residual", fmt.Sprintf("%.1f", 100*s.Residual), "% of the diameter", "standard deviation of the dots about the curve: the standard uncertainty of a size"},
		{"blur at half height", fmt.Sprintf("%.2f", s.BlurWidthPx), "px", "defects under twice this are sized by flux"}}
}

func referenceFigures(c *pipeline.Calibration) []figureRow {
	var rows []figureRow
	if r := c.Reference; r != nil {
		rows = append(rows, figureRow{"reference patch", fmt.Sprintf("%.2f ± %.2f", r.LevelDN, r.SpreadDN), "DN above dark",
			fmt.Sprintf("x %d to %d, y %d to %d px; standard deviation over %d frames", r.Box.X0, r.Box.X1-1, r.Box.Y0, r.Box.Y1-1, r.Frames)})
	}
	if e := c.PartEdge; e != nil {
		rows = append(rows, figureRow{"edge of a conforming part", fmt.Sprintf("%.2f", e.WidthPx), "px", fmt.Sprintf("10–90 %%, %d frames", e.Frames)},
			figureRow{"its diameter", fmt.Sprintf("%.2f", e.DiameterPx), "px", ""})
	}
	if n := len(c.FixedPattern); n > 0 {
		rows = append(rows, figureRow{"pixels of the fixed pattern", fmt.Sprint(n), "", "by which a moved picture or another camera is told"})
	}
	return rows
}
