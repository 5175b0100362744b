package emva

import (
	"errors"
	"fmt"
	"math"
)

// LinearShare is the share of the saturation point up to which slopes are fitted.
const LinearShare = 0.7

// Point is one step of a ramp: a pair of frames in the light and a pair in the dark.
type Point struct {
	ExposureUS float64 `json:"exposure_us"`
	Photons    float64 `json:"photons"` // mean per pixel during the exposure; 0 in every step = not known
	Bright     Level   `json:"bright"`
	Dark       Level   `json:"dark"`
}

func (p Point) signal() float64   { return p.Bright.MeanDN - p.Dark.MeanDN }
func (p Point) variance() float64 { return p.Bright.VarianceDN2 - p.Dark.VarianceDN2 }

// Figures are what a ramp says of a camera. What rests on photon counts is 0 where none
// were given; K, noise, saturation and dynamic range in electrons need none.
type Figures struct {
	Levels       int     `json:"levels"` // that the slopes rest on
	GainDNPerE   float64 `json:"gain_dn_per_e"`
	GainU        float64 `json:"gain_uncertainty"` // standard, from the scatter of the levels
	DarkNoiseDN  float64 `json:"dark_noise_dn"`    // with quantisation
	DarkNoiseE   float64 `json:"dark_noise_e"`     // without
	Responsivity float64 `json:"responsivity_dn_per_photon"`
	Efficiency   float64 `json:"quantum_efficiency"`

	SaturationReached bool    `json:"saturation_reached"` // the ramp goes beyond the peak of the variance
	SaturationDN      float64 `json:"saturation_dn"`      // above dark
	SaturationE       float64 `json:"saturation_e"`
	SaturationPhotons float64 `json:"saturation_photons"`
	SNRMax            float64 `json:"snr_max"`
	ThresholdE        float64 `json:"threshold_e"` // absolute sensitivity threshold: SNR 1
	ThresholdPhotons  float64 `json:"threshold_photons"`
	DynamicRange      float64 `json:"dynamic_range"`

	LinearityLevels int     `json:"linearity_levels"` // 0 = too few between 5 and 95 % of saturation
	LinearityLow    float64 `json:"linearity_low_percent"`
	LinearityHigh   float64 `json:"linearity_high_percent"`
}

// Evaluate returns the figures of a ramp in the order of its light. The temporal dark
// noise is that of the darkest step's dark pair, as short an exposure as the ramp has.
//
//	K          slope of σ²_y − σ²_y.dark over μ_y − μ_y.dark through the origin, to 70 % of saturation
//	R          slope of μ_y − μ_y.dark over photons through the origin, to 70 %;  η = R / K
//	saturation the step with the highest temporal variance
//	SNR_max = √μ_e.sat;  threshold μ_e.min = σ_y.dark/K + ½;  DR = μ_e.sat / μ_e.min
func Evaluate(ramp []Point) (Figures, error) {
	if len(ramp) < 2 {
		return Figures{}, fmt.Errorf("ramp: got %d steps, want at least 2 and better 10 or more, from dark to saturation", len(ramp))
	}
	peak := 0
	for i, p := range ramp {
		if p.Bright.VarianceDN2 > ramp[peak].Bright.VarianceDN2 {
			peak = i
		}
		if i > 0 && p.ExposureUS < ramp[i-1].ExposureUS && p.Photons <= ramp[i-1].Photons {
			return Figures{}, fmt.Errorf("ramp: step %d has less light than step %d, want rising steps", i, i-1)
		}
	}
	f := Figures{SaturationDN: ramp[peak].signal(), SaturationReached: peak < len(ramp)-1}
	if !(f.SaturationDN > 0) {
		return Figures{}, errors.New("ramp: no step is brighter than dark: are bright and dark exchanged?")
	}
	if err := f.fitSlopes(ramp); err != nil {
		return Figures{}, err
	}
	f.noise(ramp[0].Dark)
	f.reach(ramp[peak])
	f.linearity(ramp)
	return f, nil
}

// fitSlopes fits K and, where photons are known, the responsivity.
func (f *Figures) fitSlopes(ramp []Point) error {
	var x, y, photons []float64
	for _, p := range ramp {
		if p.signal() <= LinearShare*f.SaturationDN {
			x, y, photons = append(x, p.signal()), append(y, p.variance()), append(photons, p.Photons)
		}
	}
	if len(x) == 0 {
		return errors.New("ramp: no step lies below 70 % of saturation, want more steps")
	}
	f.Levels = len(x)
	f.GainDNPerE, f.GainU = slope(x, y)
	if !(f.GainDNPerE > 0) || math.IsInf(f.GainDNPerE, 0) {
		return errors.New("ramp: the noise does not grow with the light, want frames as the sensor gives them")
	}
	if math.IsInf(f.GainU, 0) {
		f.GainU = 0
	}
	if ramp[len(ramp)-1].Photons > 0 {
		f.Responsivity, _ = slope(photons, x)
		f.Efficiency = f.Responsivity / f.GainDNPerE
	}
	return nil
}

func (f *Figures) noise(dark Level) {
	f.DarkNoiseDN = math.Sqrt(max(dark.VarianceDN2, MinDarkVariance))
	f.DarkNoiseE = DarkNoiseE(dark.VarianceDN2, f.GainDNPerE)
}

func (f *Figures) reach(saturation Point) {
	f.SaturationE = f.SaturationDN / f.GainDNPerE
	f.ThresholdE = f.DarkNoiseDN/f.GainDNPerE + 0.5
	if f.Efficiency > 0 {
		f.SaturationPhotons = saturation.Photons
		f.SaturationE = f.Efficiency * saturation.Photons
		f.ThresholdPhotons = f.ThresholdE / f.Efficiency
	}
	f.SNRMax = math.Sqrt(f.SaturationE)
	f.DynamicRange = f.SaturationE / f.ThresholdE
}

// SNR returns the signal-to-noise ratio at a mean of electrons: μ_e / √(σ_d² + σ_q²/K² + μ_e).
func (f Figures) SNR(electrons float64) float64 {
	k := f.GainDNPerE
	return electrons / math.Sqrt(f.DarkNoiseE*f.DarkNoiseE+Quantisation/(k*k)+electrons)
}

// Decibels returns 20·log₁₀ of a ratio.
func Decibels(ratio float64) float64 { return 20 * math.Log10(ratio) }

// Bits returns log₂ of a ratio.
func Bits(ratio float64) float64 { return math.Log2(ratio) }
