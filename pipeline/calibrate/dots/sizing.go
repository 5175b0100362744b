package dots

import (
	"fmt"
	"math"
	"slices"

	"lapgate/pipeline"
)

// Known is a dot whose diameter is known.
type Known struct {
	DiameterUM float64 `json:"diameter_um"`
	FluxDNPx   float64 `json:"flux_dn_px"`
	WidthPx    float64 `json:"width_px"` // at half height, as it was found
}

// Match pairs the dots of a grid with the diameters of the target, given row by row from
// the top, 0 where there is no dot. The grid's offset is the one at which most dots fall on a
// diameter; of several, the one where flux and diameter go together best. The target must lie
// with its rows along x within 45°, first row at the top, and whole in the field.
func Match(found []Placed, diameters [][]float64) ([]Known, error) {
	rows, columns := len(diameters), 0
	for _, row := range diameters {
		columns = max(columns, len(row))
	}
	width, height := lines(found)
	if width > columns || height > rows {
		return nil, pipeline.Invalid("sizing target: dots on %d × %d places were found, the diameters are of %d × %d: wrong list, or dust among the dots", width, height, columns, rows)
	}
	var best []Known
	bestScore := math.Inf(-1)
	c0, r0 := first(found)
	for dr := range rows - height + 1 {
		for dc := range columns - width + 1 {
			var pairs []Known
			for _, d := range found {
				row, column := diameters[d.Row-r0+dr], d.Column-c0+dc
				if column < len(row) && row[column] > 0 && d.Flux > 0 {
					pairs = append(pairs, Known{row[column], d.Flux, d.DiameterPx})
				}
			}
			if score := float64(len(pairs)) + correlation(pairs); score > bestScore {
				best, bestScore = pairs, score
			}
		}
	}
	if 10*len(best) < 9*len(found) || correlation(best) < 0.5 {
		return nil, pipeline.Invalid("sizing target: %d of %d dots fall on a diameter and flux follows diameter with a correlation of %.2f, want 9 of 10 and 0.5: is the list that of this target, and the target upright?",
			len(best), len(found), correlation(best))
	}
	return best, nil
}

func first(found []Placed) (column, row int) {
	column, row = math.MaxInt, math.MaxInt
	for _, d := range found {
		column, row = min(column, d.Column), min(row, d.Row)
	}
	return column, row
}

// correlation returns that of the logarithms of diameter and flux; 0 where there is none.
func correlation(k []Known) float64 {
	l := logLine(k)
	if l.xx <= 0 || l.yy <= 0 {
		return 0
	}
	return l.xy / math.Sqrt(l.xx*l.yy)
}

// logSums are means and central sums of ln diameter (x) and ln flux (y).
type logSums struct{ n, mx, my, xx, xy, yy float64 }

func logLine(known []Known) logSums {
	s := logSums{n: float64(len(known))}
	for _, k := range known {
		s.mx, s.my = s.mx+math.Log(k.DiameterUM)/s.n, s.my+math.Log(k.FluxDNPx)/s.n
	}
	for _, k := range known {
		dx, dy := math.Log(k.DiameterUM)-s.mx, math.Log(k.FluxDNPx)-s.my
		s.xx, s.xy, s.yy = s.xx+dx*dx, s.xy+dx*dy, s.yy+dy*dy
	}
	return s
}

// leastSizes is how many different diameters an exponent can be fitted to.
const leastSizes = 3

// FitSizing fits ln flux = a + exponent·ln diameter by least squares. The residual is the
// standard deviation of the points about the line, turned into one of diameters by dividing
// by the exponent: what a flux says of a diameter is not known better than that.
func FitSizing(known []Known) (pipeline.Sizing, error) {
	var sizes []float64
	for _, k := range known {
		if !slices.Contains(sizes, k.DiameterUM) {
			sizes = append(sizes, k.DiameterUM)
		}
	}
	if len(sizes) < leastSizes || len(known) < leastSizes+1 {
		return pipeline.Sizing{}, pipeline.Invalid("sizing target: got %d dots of %d diameters, want at least %d of %d: larger dots, more light or a finer threshold",
			len(known), len(sizes), leastSizes+1, leastSizes)
	}
	l := logLine(known)
	exponent := l.xy / l.xx
	if !(exponent > 0.1) {
		return pipeline.Sizing{}, pipeline.Invalid("sizing target: flux grows with diameter to the power %.2f, want clearly above 0: is the list of diameters that of this target?", exponent)
	}
	scatter := math.Sqrt(max(l.yy-exponent*l.xy, 0) / (l.n - 2))
	slices.Sort(sizes)
	return pipeline.Sizing{Exponent: exponent, ExponentUncertainty: scatter / math.Sqrt(l.xx), FluxDNPx: math.Exp(l.my), ReferenceUM: math.Exp(l.mx),
		MinUM: sizes[0], MaxUM: sizes[len(sizes)-1], Residual: scatter / exponent, BlurWidthPx: smallest(known, sizes[0]), Dots: len(known)}, nil
}

// smallest returns the median width of the smallest dots: the blur, when they are small.
func smallest(known []Known, size float64) float64 {
	var widths []float64
	for _, k := range known {
		if k.DiameterUM == size {
			widths = append(widths, k.WidthPx)
		}
	}
	return median(widths)
}

// Describe says what was fitted.
func Describe(s pipeline.Sizing) string {
	return fmt.Sprintf("flux ∝ diameter^%.3f (± %.3f) from %d dots of %g to %g µm, residual %.1f %% of the diameter", s.Exponent, s.ExponentUncertainty, s.Dots, s.MinUM, s.MaxUM, 100*s.Residual)
}
