package masters

import (
	"fmt"
	"maps"
	"math"
	"slices"
	"time"

	"lapgate/server/ledger"
	"lapgate/server/yield"
)

const (
	driftConfidence = 0.95 // of the slope being none by chance
	driftShowings   = 20   // of the latest, at most
	driftFewest     = 4    // fewer showings say nothing
	driftAhead      = 3    // warn when a bound is met within so many showings
)

// Drift says that a master's measure is on its way to one of its bounds, or "". history
// is of one master at one place, newest first; showings before since, by another recipe
// or under other conditions than the newest do not count.
func Drift(history []ledger.MasterCheck, since time.Time) string {
	list := alike(history, since)
	if len(list) < driftFewest {
		return ""
	}
	newest := list[len(list)-1]
	hours := func(t time.Time) float64 { return t.Sub(newest.At).Hours() }
	var times, values []float64
	for _, c := range list {
		times, values = append(times, hours(c.At)), append(values, *c.Value)
	}
	ahead := driftAhead * -times[0] / float64(len(times)-1)
	a, ok, err := yield.FindApproach(times, values, newest.Low, newest.High, ahead, driftConfidence)
	if err != nil || !ok { // an error: all showings are of one moment
		return ""
	}
	when := newest.At.Add(time.Duration(math.Round(a.At * float64(time.Hour))))
	return fmt.Sprintf("%s of master %s went from %.4g to %.4g over %d showings; at this pace it meets its bound %g at %s", newest.Measure, newest.Master,
		a.Trend.At(times[0]), a.Trend.At(0), len(list), a.Bound, when.UTC().Format("2006-01-02 15:04 MST"))
}

// alike returns the showings that may be compared with the newest, oldest first.
func alike(history []ledger.MasterCheck, since time.Time) []ledger.MasterCheck {
	var out []ledger.MasterCheck
	for _, c := range history {
		if c.Value == nil || c.Result == ledger.CheckVoid {
			continue
		}
		if len(out) == driftShowings || !c.At.After(since) {
			break
		}
		if len(out) > 0 && (c.Recipe != out[0].Recipe || c.Measure != out[0].Measure || !maps.Equal(c.Conditions, out[0].Conditions)) {
			break
		}
		out = append(out, c)
	}
	slices.Reverse(out)
	return out
}
