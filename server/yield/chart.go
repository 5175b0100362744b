package yield

import (
	"errors"
	"fmt"
	"math"
)

var errNoSamples = errors.New("no samples: a chart wants at least one sample with a size above 0")

// ChartKind names what is drawn: a share of units (p), defects per unit (u) or defects per sample (c).
type ChartKind string

// The three charts for counts.
const (
	ChartP ChartKind = "p"
	ChartU ChartKind = "u"
	ChartC ChartKind = "c"
)

// Sample is one point's count: units with the property of Size units (p), or events on Size units of area, length or pieces (u). A c chart has Size 1.
type Sample struct {
	Count int
	Size  float64
}

// Point is a sample with its place on the chart.
type Point struct {
	Sample
	Value     float64 // Count / Size
	Low, High float64 // control limits; Low is not below 0, High of a p chart not above 1
	Sigma     float64 // binomial or Poisson standard deviation of Value at the centre
	Outside   bool    // Value strictly beyond a limit
}

// Chart is a control chart of counts with 3-sigma limits, and how often it signals when nothing has changed.
type Chart struct {
	Kind      ChartKind
	Centre    float64
	Estimated bool    // Centre comes from these very samples
	Scatter   float64 // limits stand at 3 × Scatter × Sigma: 1, or what NewLaneyChart found
	Points    []Point
	RunLength float64 // mean number of points to a false signal: 1 / mean over points of P(outside) at the centre, see Limits.RunLength; NaN for NewLaneyChart
}

// Limits are the 3-sigma limits for one sample size.
type Limits struct {
	Kind             ChartKind
	Centre, Size     float64
	Low, High, Sigma float64
}

// NewLimits gives centre ± 3σ, cut to the possible range, with
//
//	σ = √(centre (1-centre) / size) for p, √(centre / size) for u, √centre for c (size 1)
func NewLimits(kind ChartKind, centre, size float64) (Limits, error) {
	if err := checkLimits(kind, centre, size); err != nil {
		return Limits{}, err
	}
	l := Limits{Kind: kind, Centre: centre, Size: size, Sigma: math.Sqrt(centre / size)}
	if kind == ChartP {
		l.Sigma = math.Sqrt(centre * (1 - centre) / size)
	}
	return l.spread(1), nil
}

// spread places the limits at three times scatter times sigma.
func (l Limits) spread(scatter float64) Limits {
	l.Low = math.Max(0, l.Centre-3*scatter*l.Sigma)
	l.High = l.Centre + 3*scatter*l.Sigma
	if l.Kind == ChartP {
		l.High = math.Min(1, l.High)
	}
	return l
}

// beyond reports whether a count lies strictly outside the limits.
func (l Limits) beyond(count int) bool {
	value := float64(count) / l.Size
	return value < l.Low || value > l.High
}

// NewChart draws samples with the centre estimated from them: sum of counts / sum of sizes. A sample of size 0 is
// an error: leave hours without units out.
func NewChart(kind ChartKind, samples []Sample) (Chart, error) {
	count, size := 0.0, 0.0
	for _, s := range samples {
		count += float64(s.Count)
		size += s.Size
	}
	if !(size > 0) {
		return Chart{}, errNoSamples
	}
	chart, err := NewChartAt(kind, count/size, samples)
	chart.Estimated = err == nil
	return chart, err
}

// NewChartAt draws samples against a centre that is given: a standard, or one from earlier samples without those set aside.
func NewChartAt(kind ChartKind, centre float64, samples []Sample) (Chart, error) {
	if len(samples) == 0 {
		return Chart{}, errNoSamples
	}
	chart := Chart{Kind: kind, Centre: centre, Scatter: 1, Points: make([]Point, len(samples))}
	signal := 0.0
	for i, s := range samples {
		l, err := sampleLimits(kind, centre, s)
		if err != nil {
			return Chart{}, fmt.Errorf("sample %d: %w", i+1, err)
		}
		chart.Points[i] = l.point(s)
		signal += l.signalAt(centre) / float64(len(samples))
	}
	chart.RunLength = 1 / signal
	return chart, nil
}

func sampleLimits(kind ChartKind, centre float64, s Sample) (Limits, error) {
	if err := checkSample(kind, s); err != nil {
		return Limits{}, err
	}
	return NewLimits(kind, centre, s.Size)
}

func (l Limits) point(s Sample) Point {
	return Point{Sample: s, Value: float64(s.Count) / s.Size, Low: l.Low, High: l.High, Sigma: l.Sigma, Outside: l.beyond(s.Count)}
}

// Standardized gives each point's distance from the centre in its own sigmas, for run rules.
// Where sigma is 0, a point on the centre has 0 and any other ±Inf.
func (c Chart) Standardized() []float64 {
	z := make([]float64, len(c.Points))
	for i, p := range c.Points {
		if p.Value != c.Centre {
			z[i] = (p.Value - c.Centre) / p.Sigma
		}
	}
	return z
}

// maxCount is where a float64 stops holding every whole number, with room for the limits.
const maxCount = 1 << 50

func checkLimits(kind ChartKind, centre, size float64) error {
	if kind != ChartP && kind != ChartU && kind != ChartC {
		return fmt.Errorf("chart %q: want %q, %q or %q", kind, ChartP, ChartU, ChartC)
	}
	if err := checkPositive("sample size", size); err != nil {
		return err
	}
	if size > maxCount || centre*size > maxCount {
		return fmt.Errorf("sample size %v at centre %v: want counts below %v, which are held exactly", size, centre, float64(maxCount))
	}
	if kind == ChartP && size != math.Trunc(size) {
		return fmt.Errorf("sample size %v: a p chart wants whole units", size)
	}
	if kind == ChartC && size != 1 {
		return fmt.Errorf("sample size %v: a c chart wants 1; use a u chart for unequal samples", size)
	}
	if kind == ChartP {
		return checkRate("centre", centre)
	}
	if !(centre >= 0) || math.IsInf(centre, 1) {
		return fmt.Errorf("centre %v: want a finite number from 0 up", centre)
	}
	return nil
}

func checkSample(kind ChartKind, s Sample) error {
	if s.Count < 0 {
		return fmt.Errorf("count %d: want zero or more", s.Count)
	}
	if kind == ChartP && float64(s.Count) > s.Size {
		return fmt.Errorf("%d of %v units: want a count no larger than the units", s.Count, s.Size)
	}
	return nil
}
