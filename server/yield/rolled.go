package yield

import (
	"errors"
	"math"
)

var errNoSteps = errors.New("no steps: a rolled yield wants the yield of at least one process step")

// RolledThroughput is the yield through all steps in a row: the product of their first-pass yields.
func RolledThroughput(yields []float64) (float64, error) {
	if len(yields) == 0 {
		return 0, errNoSteps
	}
	product := 1.0
	for _, y := range yields {
		if err := checkRate("step yield", y); err != nil {
			return 0, err
		}
		product *= y
	}
	return product, nil
}

// NormalizedYield is the yield each of steps equal steps would have: rolled^(1/steps).
func NormalizedYield(rolled float64, steps int) (float64, error) {
	if steps < 1 {
		return 0, errNoSteps
	}
	if err := checkRate("rolled yield", rolled); err != nil {
		return 0, err
	}
	return math.Pow(rolled, 1/float64(steps)), nil
}

// TotalDefectsPerUnit is the defects per unit that a rolled yield implies when defects fall
// independently (Poisson): -ln(rolled); +Inf for a rolled yield of 0.
func TotalDefectsPerUnit(rolled float64) (float64, error) {
	if err := checkRate("rolled yield", rolled); err != nil {
		return 0, err
	}
	if rolled == 1 {
		return 0, nil
	}
	return -math.Log(rolled), nil
}

// Step is one process step's count of units passed at the first attempt.
type Step struct{ Passed, Shown int }

// RolledInterval is a conservative interval for the rolled yield: the product of the steps' Clopper-Pearson
// ends, each at 1-(1-confidence)/steps (Bonferroni), so that all hold together with the confidence asked for.
func RolledInterval(steps []Step, confidence float64) (Interval, error) {
	if len(steps) == 0 {
		return Interval{}, errNoSteps
	}
	if err := checkConfidence(confidence); err != nil {
		return Interval{}, err
	}
	each := 1 - (1-confidence)/float64(len(steps))
	rolled := Interval{Low: 1, High: 1}
	for _, s := range steps {
		interval, err := ClopperPearson(s.Passed, s.Shown, each)
		if err != nil {
			return Interval{}, err
		}
		rolled.Low *= interval.Low
		rolled.High *= interval.High
	}
	return rolled, nil
}

// DefectRate is defects per unit with its exact Poisson (Garwood) interval.
type DefectRate struct {
	Defects, Units int
	PerUnit        float64
	Interval       Interval
}

// DefectsPerUnit computes defects / units. With no units PerUnit is NaN and the interval [0, +Inf].
// The interval takes defects as independent; clusters make it too narrow.
func DefectsPerUnit(defects, units int, confidence float64) (DefectRate, error) {
	if units < 0 || units == 0 && defects > 0 {
		return DefectRate{}, errors.New("defects per unit: want units from 0 up and no defects without units")
	}
	events, err := Poisson(defects, confidence)
	if err != nil {
		return DefectRate{}, err
	}
	rate := DefectRate{Defects: defects, Units: units, PerUnit: share(float64(defects), float64(units))}
	rate.Interval = Interval{Low: 0, High: math.Inf(1)}
	if units > 0 {
		rate.Interval = Interval{Low: events.Low / float64(units), High: events.High / float64(units)}
	}
	return rate, nil
}
