package main

import (
	"fmt"
	"io"
	"text/tabwriter"

	"lapgate/pipeline"
)

// inspectionForm is what inspect prints as JSON. Pixels are 0-based, x right, y down,
// the centre of the first pixel is (0, 0); u and v are µm from the centre of the
// region, v up.
func inspectionForm(id pipeline.Identity, e pipeline.Evidence, j pipeline.Judgement) map[string]any {
	defects := []map[string]any{}
	for _, d := range e.Defects {
		defects = append(defects, defectForm(d))
	}
	views := []map[string]any{}
	for _, v := range e.Views {
		views = append(views, viewForm(v))
	}
	reasons := []string{}
	for _, r := range j.Reasons {
		reasons = append(reasons, r.Name)
	}
	return map[string]any{"unit": id.Unit, "part": id.Part, "recipe": j.Recipe, "verdict": j.Verdict, "reasons": reasons,
		"reason_details": j.Reasons, "coverage": e.Coverage, "defects": defects, "views": views, "failures": e.Failures,
		"truncated": e.Truncated, "saturated": e.Saturated, "program": j.ProgramVersion}
}

func defectForm(d pipeline.Defect) map[string]any {
	out := map[string]any{"id": d.ID, "kind": d.Kind, "view": d.View, "zone": d.Zone, "x_px": d.XPx, "y_px": d.YPx, "u_um": d.UUM, "v_um": d.VUM,
		"edge_distance_um": d.EdgeDistanceUM, "area_px": d.AreaPx, "area_um2": d.AreaUM2, "length_um": d.LengthUM, "width_um": d.WidthUM,
		"diameter_um":      d.DiameterUM,
		"diameter_flux_um": d.DiameterFluxUM, "diameter_flux_uncertainty_um": d.DiameterFluxUncertaintyUM, "length_px": d.LengthPx, "width_px": d.WidthPx, "diameter_px": d.DiameterPx, "angle_deg": d.AngleDeg,
		"slope_mrad": d.SlopeMrad, "flux": d.Flux, "peak_dn": d.PeakDN, "peak_sigma": d.PeakSigma, "snr": d.SNR, "dark": d.Dark, "saturated": d.Saturated, "seen_in": d.SeenIn}
	if len(d.Path) > 0 {
		path := make([][2]float64, len(d.Path))
		for i, p := range d.Path {
			path[i] = [2]float64{p.X, p.Y}
		}
		out["path_px"] = path
	}
	return out
}

func viewForm(v pipeline.ViewEvidence) map[string]any {
	out := map[string]any{"name": v.Name, "um_per_px": v.UMPerPx, "background": v.Coverage.Background, "noise": v.Coverage.Noise,
		"coverage": v.Coverage.Share, "calibration": v.Calibration, "measurements": v.Measurements, "ms": v.Milliseconds,
		"region": v.Region, "defects": len(v.Defects)}
	if len(v.Frames) > 0 {
		h := v.Frames[0].Header
		out["width"], out["height"], out["pixel_format"] = h.Width, h.Height, h.Format.String()
	}
	proof := map[string]any{}
	for _, p := range v.Proofs {
		proof[p.Name] = map[string]any{"value": p.Value, "low": p.Low, "high": p.High, "unit": p.Unit, "ok": p.OK, "reason": p.Reason}
	}
	out["proof"] = proof
	return out
}

func printInspection(w io.Writer, id pipeline.Identity, e pipeline.Evidence, j pipeline.Judgement) error {
	fmt.Fprintf(w, "%s  unit %s of part %s  coverage %.4f\n", j.Verdict, id.Unit, id.Part, e.Coverage)
	for _, r := range j.Reasons {
		fmt.Fprintf(w, "  %s (%s): %s\n", r.Name, r.Verdict, r.Text)
	}
	if len(e.Defects) == 0 {
		return nil
	}
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintln(t, "id\tkind\tview\tzone\tu_um\tv_um\tlength_um\twidth_um\tdiameter_um\tpeak_sigma\tsnr\tslope_mrad\t")
	for _, d := range e.Defects {
		fmt.Fprintf(t, "%d\t%s\t%s\t%s\t%.0f\t%.0f\t%.1f\t%.1f\t%.1f\t%.1f\t%.1f\t%.2f\t\n", d.ID, d.Kind, d.View, d.Zone, d.UUM, d.VUM, d.LengthUM, d.WidthUM, d.DiameterUM, d.PeakSigma, d.SNR, d.SlopeMrad)
	}
	return t.Flush()
}
