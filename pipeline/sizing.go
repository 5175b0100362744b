package pipeline

import "math"

// Sizing is the curve of a defect's flux against its diameter, fitted to a target with
// known dots: flux = FluxDNPx · (diameter / ReferenceUM)^Exponent. Uniform scatterers
// give an exponent near 2, dots that scatter at their rim one near 1; it is never assumed.
type Sizing struct {
	Exponent            float64 `json:"exponent"`
	ExponentUncertainty float64 `json:"exponent_uncertainty"` // standard uncertainty of the fit
	FluxDNPx            float64 `json:"flux_dn_px"`           // at ReferenceUM
	ReferenceUM         float64 `json:"reference_um"`
	MinUM               float64 `json:"min_um"` // the smallest and largest dots that were fitted
	MaxUM               float64 `json:"max_um"`
	Residual            float64 `json:"residual"`      // relative standard deviation of the diameters about the curve
	BlurWidthPx         float64 `json:"blur_width_px"` // of the smallest dots at half height
	Dots                int     `json:"dots"`          // that were fitted
}

// Resolved reports whether a defect as wide as diameterPx at half height is large enough
// to be sized by its outline: twice the blur.
func (s Sizing) Resolved(diameterPx float64) bool { return diameterPx >= 2*s.BlurWidthPx }

// DiameterUM returns the diameter that belongs to a flux, and its standard uncertainty
// for a defect that follows the target's law: the residual spread, the flux's own noise
// (1 / snr, where snr is above 0), and the exponent's uncertainty away from the reference,
// in quadrature. It returns false outside the range of the dots, one residual wider at
// each end: the curve is not known there.
func (s Sizing) DiameterUM(fluxDNPx, snr float64) (diameterUM, uncertaintyUM float64, ok bool) {
	if !(fluxDNPx > 0) || !(s.FluxDNPx > 0) || !(s.Exponent > 0) {
		return 0, 0, false
	}
	away := math.Log(fluxDNPx/s.FluxDNPx) / s.Exponent
	d := s.ReferenceUM * math.Exp(away)
	if d < s.MinUM*(1-s.Residual) || d > s.MaxUM*(1+s.Residual) {
		return 0, 0, false
	}
	noise := 0.0
	if snr > 0 {
		noise = 1 / (snr * s.Exponent)
	}
	return d, d * math.Hypot(math.Hypot(s.Residual, noise), away*s.ExponentUncertainty/s.Exponent), true
}
