package calibrate

import (
	"math"

	"lapgate/pipeline"
	"lapgate/pipeline/calibrate/emva"
)

// noiseModel puts a dark variance and K together; quantisation stays in the dark noise.
func noiseModel(gain, darkVariance float64) pipeline.NoiseModel {
	return pipeline.NoiseModel{GainDNPerE: gain, DarkDN: math.Sqrt(max(darkVariance, emva.MinDarkVariance))}
}

// DarkNoiseE returns the temporal dark noise in electrons, quantisation taken out (EMVA
// Standard 1288). It is 0 where K is unknown.
func DarkNoiseE(n pipeline.NoiseModel) float64 {
	return emva.DarkNoiseE(n.DarkDN*n.DarkDN, n.GainDNPerE)
}
