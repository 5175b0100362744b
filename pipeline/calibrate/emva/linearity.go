package emva

import "slices"

// linearity fits mean above dark = a + b·light over the steps between 5 and 95 % of
// saturation so that the relative deviations are least (weights 1/y²), and reports the
// lowest and highest deviation from the line in percent (EMVA Standard 1288). light is
// in photons, or exposure where those are not known.
func (f *Figures) linearity(ramp []Point) {
	_, deviations := Deviations(ramp, *f)
	if len(deviations) == 0 {
		return
	}
	f.LinearityLevels, f.LinearityLow, f.LinearityHigh = len(deviations), slices.Min(deviations), slices.Max(deviations)
}

// Deviations returns the light of the steps between 5 and 95 % of saturation and how far
// each lies off that line, in percent of it. Both are empty with fewer than three steps.
func Deviations(ramp []Point, f Figures) (light, percent []float64) {
	var y []float64
	for _, p := range ramp {
		x := p.Photons
		if f.Responsivity == 0 {
			x = p.ExposureUS
		}
		if s := p.signal(); s >= 0.05*f.SaturationDN && s <= 0.95*f.SaturationDN {
			light, y = append(light, x), append(y, s)
		}
	}
	a, b, ok := relativeLine(light, y)
	if !ok {
		return nil, nil
	}
	for i, x := range light {
		line := a + b*x
		percent = append(percent, 100*(y[i]-line)/line)
	}
	return light, percent
}

// relativeLine minimises Σ((y − a − b·x)/y)². It needs three different x.
func relativeLine(x, y []float64) (a, b float64, ok bool) {
	var w, wx, wy, wxx, wxy float64
	for i, v := range x {
		k := 1 / (y[i] * y[i])
		w, wx, wy, wxx, wxy = w+k, wx+k*v, wy+k*y[i], wxx+k*v*v, wxy+k*v*y[i]
	}
	d := w*wxx - wx*wx
	if len(x) < 3 || !(d > 1e-12*w*wxx) {
		return 0, 0, false
	}
	return (wy*wxx - wx*wxy) / d, (w*wxy - wx*wy) / d, true
}
