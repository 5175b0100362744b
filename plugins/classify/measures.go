package classify

import (
	"lapgate/pipeline"
	"lapgate/pipeline/rules"
)

// measures are the names that a rule can use of a defect: the same as those of a limit.
func measures() *rules.Record[pipeline.Defect] {
	num, text := rules.NumberField[pipeline.Defect], rules.TextField[pipeline.Defect]
	truth := rules.TruthField[pipeline.Defect]
	return rules.NewRecord("defect",
		text("kind", func(d *pipeline.Defect) string { return string(d.Kind) }),
		text("view", func(d *pipeline.Defect) string { return d.View }),
		text("zone", func(d *pipeline.Defect) string { return d.Zone }),
		num("u_um", func(d *pipeline.Defect) float64 { return d.UUM }),
		num("v_um", func(d *pipeline.Defect) float64 { return d.VUM }),
		num("edge_distance_um", func(d *pipeline.Defect) float64 { return d.EdgeDistanceUM }),
		num("area_px", func(d *pipeline.Defect) float64 { return float64(d.AreaPx) }),
		num("area_um2", func(d *pipeline.Defect) float64 { return d.AreaUM2 }),
		num("length_um", func(d *pipeline.Defect) float64 { return d.LengthUM }),
		num("width_um", func(d *pipeline.Defect) float64 { return d.WidthUM }),
		num("diameter_um", func(d *pipeline.Defect) float64 { return d.DiameterUM }),
		num("diameter_flux_um", func(d *pipeline.Defect) float64 { return d.DiameterFluxUM }),
		num("slope_mrad", func(d *pipeline.Defect) float64 { return d.SlopeMrad }),
		num("elongation", func(d *pipeline.Defect) float64 { return d.Elongation() }),
		num("coil", func(d *pipeline.Defect) float64 { return d.Coil() }),
		num("reach_um", func(d *pipeline.Defect) float64 { return d.ReachUM() }),
		num("angle_deg", func(d *pipeline.Defect) float64 { return d.AngleDeg }),
		num("flux", func(d *pipeline.Defect) float64 { return d.Flux }),
		num("peak_dn", func(d *pipeline.Defect) float64 { return d.PeakDN }),
		num("peak_sigma", func(d *pipeline.Defect) float64 { return d.PeakSigma }),
		num("snr", func(d *pipeline.Defect) float64 { return d.SNR }),
		num("views_seen", func(d *pipeline.Defect) float64 { return float64(max(len(d.SeenIn), 1)) }),
		truth("dark", func(d *pipeline.Defect) bool { return d.Dark }),
		truth("saturated", func(d *pipeline.Defect) bool { return d.Saturated }),
	)
}

// Names lists the names that a rule can use.
func Names() []string {
	var out []string
	for _, v := range measures().Vars() {
		out = append(out, v.Name)
	}
	return out
}
