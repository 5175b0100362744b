package main

import (
	"io"
	"math"
	"path/filepath"
	"slices"

	"lapgate/configs"
	"lapgate/pipeline/render"
	"lapgate/server/yield"
)

// How many frames are taken beside those of the scene, as shares of them.
const (
	conformingShare = 1.0  // the same units without the digs above the limit
	lampShare       = 0.25 // the first units again at each other lamp power
	plainShare      = 0.03 // frames on which the plain chain runs
)

// The conditions. A showing of its own gives other lamp powers noise of their own.
var (
	asDrawn         = condition{name: "as drawn", lamp: 1, showing: 1}
	conformingUnits = condition{name: "conforming", lamp: 1, showing: 1, conforming: true}
	dimLamp         = condition{name: "lamp 50 %", lamp: 0.5, showing: 2}
	strongLamp      = condition{name: "lamp 150 %", lamp: 1.5, showing: 3}
)

// smallestMeasured is the diameter, in px, from which the size is held against truth.
const smallestMeasured = 6

// evaluateRendered inspects the units of the detection scene and holds what was found
// against what was drawn.
func evaluateRendered(o options, progress io.Writer) (*result, error) {
	t, err := newTrial(o, nil)
	if err != nil {
		return nil, err
	}
	defer t.line.Close()
	part := func(share float64) int { return max(int(share*float64(o.frames)), 1) }
	var shown [4][]inspected
	for i, c := range []struct {
		condition
		n int
	}{{asDrawn, o.frames}, {conformingUnits, part(conformingShare)}, {dimLamp, part(lampShare)}, {strongLamp, part(lampShare)}} {
		if shown[i], err = t.units(c.n, c.condition, progress); err != nil {
			return nil, err
		}
	}
	nominal, conforming, dim, strong := shown[0], shown[1], shown[2], shown[3]
	plain, err := t.plainUnits(part(plainShare))
	if err != nil {
		return nil, err
	}
	r := &result{}
	if err := r.detection(nominal, o.frames); err != nil {
		return nil, err
	}
	r.sizes(nominal, dim, strong)
	if err := r.falseDefects(nominal, conforming); err != nil {
		return nil, err
	}
	if err := r.verdicts(conforming); err != nil {
		return nil, err
	}
	r.plain("plain OpenCV chain: false defects per frame", mean(plain), len(plain), "OpenCV functions, 6 sigmas, no calibration, no region")
	r.atLeast("plain OpenCV chain: false defects per frame", mean(plain), 3)
	return r, nil
}

// detection adds found share and centroid error of the isolated digs.
func (r *result) detection(units []inspected, frames int) error {
	var total, found, split int
	var off []float64
	for _, d := range digsOf(units) {
		total++
		if d.pieces == 0 {
			continue
		}
		found++
		off = append(off, d.offPx)
		if d.pieces > 1 {
			split++
		}
	}
	share, err := r.share("isolated digs of peak >= 8 sigma found", found, total, "share")
	if err != nil {
		return err
	}
	r.plain("found in more than one piece", float64(split), found, "digs")
	r.between("centroid error, median", median(off), medianInterval(off), len(off), "px")
	r.plain("centroid error, 95 % quantile", quantile(off, 0.95), len(off), "px")
	r.atLeast("rendered frames", float64(len(units)), float64(frames))
	r.atLeast("isolated digs per 400 frames", float64(total)*400/float64(len(units)), 2000)
	r.atLeast("share of digs found", share, 0.99)
	r.atMost("centroid error, median, px", median(off), 0.15)
	return nil
}

// sizes adds the diameter error and how it moves with the lamp.
func (r *result) sizes(nominal, dim, strong []inspected) {
	at := map[digKey]float64{}
	var ratios, sizes []float64
	for _, d := range digsOf(nominal) {
		if d.pieces > 0 && d.truePx >= smallestMeasured {
			at[d.key] = d.diameterPx
			ratios = append(ratios, d.diameterPx/d.truePx)
			sizes = append(sizes, math.Abs(d.diameterPx/d.truePx-1))
		}
	}
	r.between("diameter over truth, median", median(ratios), medianInterval(ratios), len(ratios), "digs from 6 px")
	r.plain("|diameter error|, median", median(sizes), len(sizes), "digs from 6 px")
	r.plain("|diameter error|, 95 % quantile", quantile(sizes, 0.95), len(sizes), "digs from 6 px")
	r.atMost("|diameter error|, median", median(sizes), 0.10)
	r.lampChange("lamp 50 %", at, dim)
	r.lampChange("lamp 150 %", at, strong)
}

// lampChange adds how the diameters differ from those of the same digs at nominal power.
func (r *result) lampChange(lamp string, nominal map[digKey]float64, units []inspected) {
	var change []float64
	for _, d := range digsOf(units) {
		if was := nominal[d.key]; was > 0 && d.pieces > 0 {
			change = append(change, d.diameterPx/was-1)
		}
	}
	r.between("diameter change at "+lamp+", median", median(change), medianInterval(change), len(change), "same digs, another showing")
	for i := range change {
		change[i] = math.Abs(change[i])
	}
	r.plain("|diameter change| at "+lamp+", median", median(change), len(change), "same digs, another showing")
	r.atMost("|diameter change| at "+lamp+", median", median(change), 0.05)
}

// falseDefects adds how many defects were reported where nothing was drawn.
func (r *result) falseDefects(nominal, conforming []inspected) error {
	for _, s := range []struct {
		name  string
		units []inspected
	}{{"all units as drawn", nominal}, {"conforming units", conforming}} {
		n := 0
		for _, u := range s.units {
			n += u.falses
		}
		i, err := yield.Poisson(n, confidence)
		if err != nil {
			return err
		}
		frames := float64(len(s.units))
		r.between("false defects per frame, "+s.name, float64(n)/frames, yield.Interval{Low: i.Low / frames, High: i.High / frames}, len(s.units), "frames")
	}
	n := 0
	for _, u := range conforming {
		n += u.falses
	}
	upper, err := yield.PoissonUpper(n, confidence)
	if err != nil {
		return err
	}
	r.plain("the same, one-sided upper 95 % bound", upper.High/float64(len(conforming)), len(conforming), "frames")
	// Of white noise one pixel in 1/(1 − Φ(6)) reaches k_high; neighbours come together.
	r.plain("the same, of white noise alone at 6 sigmas at most", float64(conforming[0].regionPx)*math.Erfc(6/math.Sqrt2)/2, conforming[0].regionPx, "pixels of the part")
	r.atMost("false defects per conforming frame, upper 95 % bound", upper.High/float64(len(conforming)), 0.02)
	return nil
}

// verdicts adds how many conforming units were not accepted.
func (r *result) verdicts(conforming []inspected) error {
	accepted := 0
	for _, u := range conforming {
		if u.accepted {
			accepted++
		}
	}
	_, err := r.share("conforming units accepted", accepted, len(conforming), "digs up to 90 % of the limit")
	return err
}

// newTrial reads scene and recipe and calibrates. change (nil = none) may alter the scene.
func newTrial(o options, change func(*render.Scene)) (*trial, error) {
	scene, _, err := configs.Load[render.Scene](filepath.Join(o.testdata, "scenes", "detect.yaml"))
	if err != nil {
		return nil, err
	}
	if change != nil {
		change(&scene)
	}
	renderer, err := render.New(scene)
	if err != nil {
		return nil, err
	}
	cal, err := calibrateView(renderer, scene.Views[0])
	if err != nil {
		return nil, err
	}
	recipe, cat, err := loadRecipe(o, "detect")
	if err != nil {
		return nil, err
	}
	line, err := build(recipe, cat, cal, false)
	return &trial{renderer: renderer, line: line, view: scene.Views[0].Name}, err
}

func mean(v []float64) float64 {
	sum := 0.0
	for _, x := range v {
		sum += x
	}
	return sum / float64(len(v))
}

func median(v []float64) float64 { return quantile(v, 0.5) }

// quantile returns the q-quantile of v by linear interpolation; NaN of nothing.
func quantile(v []float64, q float64) float64 {
	if len(v) == 0 {
		return math.NaN()
	}
	s := slices.Sorted(slices.Values(v))
	at := q * float64(len(s)-1)
	i := int(at)
	return s[i] + (at-float64(i))*(s[min(i+1, len(s)-1)]-s[i])
}

// medianInterval returns the order-statistic interval of the median: with p the
// Clopper–Pearson bounds about one half the quantiles at those shares (binomial; value
// from memory: Conover, Practical Nonparametric Statistics).
func medianInterval(v []float64) yield.Interval {
	i, err := yield.ClopperPearson(len(v)/2, len(v), confidence)
	if err != nil {
		return yield.Interval{Low: math.NaN(), High: math.NaN()}
	}
	return yield.Interval{Low: quantile(v, i.Low), High: quantile(v, i.High)}
}
