package main

import (
	"lapgate/pipeline"
	"lapgate/pipeline/calibrate"
	"lapgate/pipeline/calibrate/emva"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/files"
)

// addRamp adds the EMVA 1288 figures of the ramp to out. The interval of K is that of
// the steps below 70 % of saturation drawn with replacement, the saturation point kept.
func addRamp(out map[string]any, dir string) error {
	steps, err := calibrate.RampFolder(dir, pipeline.Capture{}, files.Options{SignificantBits: 12})
	if err != nil {
		return err
	}
	ramp, _, err := calibrate.MeasureRamp(steps, nil)
	if err != nil {
		return err
	}
	f := ramp.Figures
	low, high := gainInterval(ramp)
	out["gain_ramp_dn_per_e"] = figure{Value: f.GainDNPerE, Low: &low, High: &high, N: f.Levels, Note: "levels; published full set of 50: 0.2801"}
	out["gain_ramp_uncertainty"] = f.GainU
	out["quantum_efficiency"] = f.Efficiency
	out["ramp_levels"] = f.Levels
	out["ramp_dark_noise_e"] = f.DarkNoiseE
	out["ramp_saturation_e"] = f.SaturationE
	out["ramp_snr_max_db"] = emva.Decibels(f.SNRMax)
	out["ramp_dynamic_range_db"] = emva.Decibels(f.DynamicRange)
	out["ramp_linearity_low_percent"] = f.LinearityLow
	out["ramp_linearity_high_percent"] = f.LinearityHigh
	out["ramp_dsnu_e"] = emva.DSNU(ramp.Dark.VarianceDN2, f.GainDNPerE)
	out["ramp_prnu_percent"] = emva.PRNU(ramp.Bright.VarianceDN2, ramp.Dark.VarianceDN2, ramp.Bright.MeanDN, ramp.Dark.MeanDN)
	return nil
}

func gainInterval(r calibrate.Ramp) (low, high float64) {
	var bright, dark []emva.Level
	for _, p := range r.Points {
		if p.Bright.MeanDN-p.Dark.MeanDN <= emva.LinearShare*r.Figures.SaturationDN {
			bright, dark = append(bright, p.Bright), append(dark, p.Dark)
		}
	}
	i := bootstrap(len(bright), func(drawn []int) float64 {
		b, d := make([]emva.Level, len(drawn)), make([]emva.Level, len(drawn))
		for k, n := range drawn {
			b[k], d[k] = bright[n], dark[n]
		}
		gain, err := emva.SystemGain(b, d)
		if err != nil { // only the darkest step was drawn
			return r.Figures.GainDNPerE
		}
		return gain
	})
	return i.Low, i.High
}

func pairLevel(a, b raster.Raw) (emva.Level, error) {
	ca, err := a.Counts()
	if err != nil {
		return emva.Level{}, err
	}
	cb, err := b.Counts()
	if err != nil {
		return emva.Level{}, err
	}
	return emva.Pair(ca, cb), nil
}
