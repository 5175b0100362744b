package report

import (
	_ "embed"
	"fmt"
	"html/template"
	"io"
	"sort"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate"
	"lapgate/pipeline/calibrate/dots"
)

//go:embed calibration.html
var calibrationPage string

// calibrationView is what the page shows, in the order of the page.
type calibrationView struct {
	Calibration *pipeline.Calibration
	Provenance  calibrate.Provenance
	Cautions    []string
	Groups      []figureGroup
	Transfer    template.HTML
	Linearity   template.HTML
	Residuals   template.HTML
	ResidualBy  string // how much longer than in the picture the lines are drawn
	Sizing      template.HTML
	Pictures    []calibrationPicture
	Bad         []badRow
	Sources     []sourceGroup
}

// figureGroup is a table of figures with a heading.
type figureGroup struct {
	Name string
	Rows []figureRow
}

// figureRow is one figure; all are texts with the digits that mean something.
type figureRow struct{ Name, Value, Unit, Note string }

type badRow struct {
	Reason string
	Count  int
}

// sourceGroup is the frames of one kind.
type sourceGroup struct {
	Kind  string
	Files []calibrate.SourceFrame
}

// WriteCalibration writes a calibration as one self-contained HTML page.
func WriteCalibration(w io.Writer, m calibrate.Made) error {
	page, err := parsePage("calibration", calibrationPage, template.FuncMap{"short": func(s string) string { return s[:min(len(s), 16)] }})
	if err != nil {
		return err
	}
	v, err := viewCalibration(m)
	if err != nil {
		return err
	}
	return page.Execute(w, v)
}

func viewCalibration(m calibrate.Made) (*calibrationView, error) {
	c, p := m.Calibration, m.Provenance
	v := &calibrationView{Calibration: c, Provenance: p, Cautions: calibrationCautions(m), Groups: calibrationFigures(m), Sources: sourcesOf(p.Frames),
		Bad: []badRow{{"hot: dark level far above the neighbours", p.Bad.Hot}, {"noisy in the dark", p.Bad.Noisy},
			{"deviating: response far from the neighbours", p.Bad.Deviating}, {"dead: hardly any response", p.Bad.Dead}, {"saturated in a frame", p.Bad.Saturated}}}
	var err error
	if v.Pictures, err = calibrationPictures(c); err != nil {
		return nil, err
	}
	if v.Transfer, err = drawTransfer(m); err != nil {
		return nil, err
	}
	if p.Ramp != nil {
		if v.Linearity, err = drawLinearity(p.Ramp); err != nil {
			return nil, err
		}
	}
	if p.Target != nil && len(p.Target.Residuals) > 0 {
		if v.Residuals, v.ResidualBy, err = drawResiduals(p.Target, c.Capture.Width, c.Capture.Height); err != nil {
			return nil, err
		}
	}
	if c.Sizing != nil && len(p.SizingDots) > 0 {
		v.Sizing, err = drawSizing(*c.Sizing, p.SizingDots)
	}
	return v, err
}

func sourcesOf(frames []calibrate.SourceFrame) []sourceGroup {
	at := map[string]int{}
	var out []sourceGroup
	for _, f := range frames {
		i, ok := at[f.Kind]
		if !ok {
			i = len(out)
			at[f.Kind] = i
			out = append(out, sourceGroup{Kind: f.Kind})
		}
		out[i].Files = append(out[i].Files, f)
	}
	sort.SliceStable(out, func(i, k int) bool { return out[i].Kind < out[k].Kind })
	return out
}

// calibrationCautions are what a reader must know before trusting the page: what holds
// for every calibration, and what this one lacks.
func calibrationCautions(m calibrate.Made) []string {
	out := []string{
		"This page is not a calibration certificate. A verdict is not a certificate either: acceptance follows the contract's drawing and standard, and an accredited laboratory where one is required.",
		"Bright LED and laser lighting can hurt eyes (IEC 62471, IEC 60825): follow the maker's and local rules. The reject gate is not a safety device: machine guarding follows local codes and licensed practice.",
	}
	out = append(out, cameraCautions(m)...)
	return append(out, opticsCautions(m.Calibration, m.Provenance.Target)...)
}

func cameraCautions(m calibrate.Made) []string {
	c, p := m.Calibration, m.Provenance
	var out []string
	switch {
	case p.Ramp == nil && c.Noise.GainDNPerE == 0:
		out = append(out, "No response frames and no ramp were taken: system gain, and with it noise in electrons, is unknown.")
	case p.Ramp == nil:
		out = append(out, "No ramp was taken: the system gain rests on the spread of brightness within the response frames, and saturation, dynamic range and linearity are not known.")
	case !p.Ramp.Figures.SaturationReached:
		out = append(out, "The ramp does not go beyond saturation: full well, SNR max and dynamic range are at least what is stated.")
	}
	if p.Ramp != nil && p.Ramp.Figures.Efficiency == 0 {
		out = append(out, "No photon counts were given: responsivity, quantum efficiency and the threshold in photons are not known.")
	}
	if p.Ramp != nil && p.ResponseGain > 0 && (p.ResponseGain > 1.1*c.Noise.GainDNPerE || p.ResponseGain < 0.9*c.Noise.GainDNPerE) {
		out = append(out, fmt.Sprintf("The response frames give a system gain of %.4g DN per electron, the ramp %.4g: they should agree within a few percent.", p.ResponseGain, c.Noise.GainDNPerE))
	}
	if s := c.Sensor; s != nil && s.HighC-s.LowC > 5 {
		out = append(out, fmt.Sprintf("The camera's temperature changed by %.1f K while the frames were taken: let it warm up.", s.HighC-s.LowC))
	}
	return out
}

func opticsCautions(c *pipeline.Calibration, target *dots.Scale) []string {
	var out []string
	if target == nil {
		out = append(out, "The scale is a stated number and no distortion was measured.")
	} else if target.FieldShare < 0.6 {
		out = append(out, fmt.Sprintf("The dots cover %.0f %% of the field: beyond them the distortion map is an extrapolation.", 100*target.FieldShare))
	}
	if c.Sizing != nil {
		out = append(out, "The sizing curve holds for defects that scatter as the target's dots do, under this light; for others its uncertainty is too small.")
	}
	if c.Reference == nil {
		out = append(out, "No reference patch is known: frames of parts cannot show that the lamp is as it was.")
	}
	return out
}
