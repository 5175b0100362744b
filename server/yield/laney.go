package yield

import (
	"fmt"
	"math"
)

// NewLaneyChart draws a p or u chart whose limits also allow for scatter between samples (Laney 2002, p′ and u′):
// with z = (value - centre) / sigma at each sample, limits stand at
//
//	centre ± 3 σz sigma,  σz = mean |z(i) - z(i-1)| / 1.128
//
// It is for large samples, where the rate's own movement from sample to sample makes plain limits signal all the
// time. The order of samples matters. The run length is NaN: it hangs on how the rate moves, which counts alone do not say.
func NewLaneyChart(kind ChartKind, samples []Sample) (Chart, error) {
	if kind == ChartC {
		return Chart{}, fmt.Errorf("chart %q: want %q or %q, which hold a sample's size", kind, ChartP, ChartU)
	}
	if len(samples) < 2 {
		return Chart{}, fmt.Errorf("%d samples: the scatter from one to the next wants two or more", len(samples))
	}
	chart, err := NewChart(kind, samples)
	if err != nil {
		return Chart{}, err
	}
	const rangeOfTwo = 1.128 // d2, mean range of two standard normal values
	chart.Scatter = meanStep(chart.Standardized()) / rangeOfTwo
	chart.RunLength = math.NaN()
	for i, p := range chart.Points {
		l := Limits{Kind: kind, Centre: chart.Centre, Size: p.Size, Sigma: p.Sigma}
		chart.Points[i] = l.spread(chart.Scatter).point(p.Sample)
	}
	return chart, nil
}

// meanStep is the mean absolute difference of neighbours.
func meanStep(z []float64) float64 {
	sum := 0.0
	for i := 1; i < len(z); i++ {
		sum += math.Abs(z[i] - z[i-1])
	}
	return sum / float64(len(z)-1)
}
