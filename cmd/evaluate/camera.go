package main

import (
	"io"
	"maps"
	"math"
	"slices"
)

// evaluateCamera holds the flat-field figures against physics: a correction cannot go
// below the temporal noise, and K and QE are those of the published full set.
func evaluateCamera(o options, _ io.Writer) (*result, error) {
	got, err := evaluateEMVA(o.data)
	if err != nil {
		return nil, err
	}
	r := numbers(got)
	value := func(name string) float64 { return numberOf(got[name]) }
	r.atMost("corrected spread over the noise floor, 3 frames", value("corrected_over_floor"), 1.02)
	r.atMost("corrected spread over the noise floor, single frames", value("one_corrected_over_floor"), 1.02)
	r.atLeast("low-frequency shading, raw over corrected", value("low_frequency_ratio"), 5)
	r.atMost("|K / 0.2801 − 1|", math.Abs(value("gain_ramp_dn_per_e")/0.2801-1), 0.03)
	r.atMost("|QE / 0.452 − 1|", math.Abs(value("quantum_efficiency")/0.452-1), 0.03)
	return r, nil
}

// evaluateLine holds the line camera's figures against those of a plain script.
func evaluateLine(o options, _ io.Writer) (*result, error) {
	got, err := evaluateLineFlats(o.data)
	if err != nil {
		return nil, err
	}
	r := numbers(got)
	spread, _ := got["corrected_spread_percent"].(float64)
	r.atMost("corrected spread, %", spread, 0.55)
	return r, nil
}

// numbers turns named numbers into figures in the order of their names.
func numbers(from map[string]any) *result {
	r := &result{}
	for _, name := range slices.Sorted(maps.Keys(from)) {
		switch v := from[name].(type) {
		case float64:
			r.plain(name, v, 0, "")
		case int:
			r.plain(name, float64(v), 0, "")
		case figure:
			v.Name = name
			r.add(v)
		}
	}
	return r
}

// numberOf returns the value of a number with or without its interval; 0 for anything else.
func numberOf(v any) float64 {
	switch v := v.(type) {
	case float64:
		return v
	case figure:
		return v.Value
	}
	return 0
}
