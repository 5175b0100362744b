package areas

import (
	"fmt"

	"lapgate/pipeline/raster"
)

// Settings of the stage.
type Settings struct {
	// CellPx is the side of the cells, in px.
	CellPx int `json:"cell_px" yaml:"cell_px"`
	// Order of the smooth surface of a good part: 0 level, 1 tilted, 2 bent.
	Order int `json:"order" yaml:"order"`
	// KSigma is by how many robust sigmas of the cells an area must stand out.
	KSigma float64 `json:"k_sigma" yaml:"k_sigma"`
	// MinContrastDN is by how many corrected DN it must stand out at least: what the haze of
	// a good part wanders stays below. Above 0.
	MinContrastDN float64 `json:"min_contrast_dn" yaml:"min_contrast_dn"`
	// MinDiameterUM is the diameter below which an area is left to the fine search, in µm.
	// 0: two cells.
	MinDiameterUM float64 `json:"min_diameter_um" yaml:"min_diameter_um"`
	// MaxUnevennessDN is the largest robust sigma of the cells about the surface, in
	// corrected DN, that a good part has. 0: evenness is not proven.
	MaxUnevennessDN float64 `json:"max_unevenness_dn" yaml:"max_unevenness_dn"`
}

// Default looks at cells of 16 px for what stands out by 6 sigmas and 2 DN.
var Default = Settings{CellPx: 16, Order: 2, KSigma: 6, MinContrastDN: 2}

// Check implements pipeline.Checker.
func (s Settings) Check() error {
	switch {
	case s.CellPx < 4 || s.CellPx > 256:
		return fmt.Errorf("cell_px: got %d, want 4 to 256", s.CellPx)
	case s.Order < 0 || s.Order > raster.MaxSurfaceOrder:
		return fmt.Errorf("order: got %d, want 0 to %d", s.Order, raster.MaxSurfaceOrder)
	case !(s.KSigma >= 1 && s.KSigma <= 1e6):
		return fmt.Errorf("k_sigma: got %g, want 1 to 1000000", s.KSigma)
	case !(s.MinContrastDN > 0 && s.MinContrastDN <= 1e6):
		return fmt.Errorf("min_contrast_dn: got %g, want above 0 and at most 1000000", s.MinContrastDN)
	case !(s.MinDiameterUM >= 0 && s.MinDiameterUM <= 1e9):
		return fmt.Errorf("min_diameter_um: got %g, want 0 to 1e9", s.MinDiameterUM)
	case !(s.MaxUnevennessDN >= 0 && s.MaxUnevennessDN <= 1e6):
		return fmt.Errorf("max_unevenness_dn: got %g, want 0 (not proven) to 1000000", s.MaxUnevennessDN)
	}
	return nil
}
