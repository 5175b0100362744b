package cost

import (
	"math"
	"sort"

	"lapgate/server/volume/plan"
	"lapgate/server/volume/queueing"
)

// Stations is what an inspection needs to keep the pace.
type Stations struct {
	TaktS     float64 `json:"takt_s"`      // seconds per look at the pace of the demand
	Load      float64 `json:"load_erlang"` // stations kept busy
	Count     int     `json:"count"`       // stations needed by takt and, if asked, by wait
	WaitS     float64 `json:"wait_s"`      // mean wait before a station, M/D/c exact
	Waiting   float64 `json:"waiting"`     // chance of a wait, Erlang C (exponential times: an upper view)
	WaitAsked bool    `json:"wait_asked"`  // whether max_wait_s set the count
}

// tableStations is how many stations the table of loads for a wait reaches;
// beyond it the load per station of its last row is kept, which is cautious.
const tableStations = 16

// periods is how many periods a quantity takes at the pace of the demand.
func (c *Combination) periods(quantity float64) float64 {
	if d := c.model.plan.Demand.UnitsPerPeriod; d > 0 {
		return math.Max(1, quantity/d)
	}
	return 1
}

// load is the offered load in erlangs of a total number of looks.
func (c *Combination) load(looks, quantity float64) float64 {
	return looks * c.gate.hours / (c.periods(quantity) * c.model.plan.WorkingTime.HoursPerPeriod)
}

// count is the smallest number of stations that is not fully loaded and, if
// a wait is asked for, keeps it.
func (g *gate) count(load float64) float64 {
	if len(g.loads) == 0 {
		return math.Floor(load+1e-9) + 1
	}
	if c := sort.SearchFloat64s(g.loads, load); c < len(g.loads) {
		return float64(c + 1)
	}
	return ceil(load / g.loads[len(g.loads)-1] * float64(len(g.loads)))
}

// loadsForWait is the largest offered load that 1, 2 ... stations take with a
// mean M/D/c wait of at most limit service times.
func loadsForWait(limit float64) []float64 {
	loads := make([]float64, tableStations)
	for c := range loads {
		low, high := 0.0, float64(c+1)
		for range 30 {
			mid := (low + high) / 2
			if wait, err := queueing.WaitMDc(c+1, mid); err == nil && wait <= limit {
				low = mid
			} else {
				high = mid
			}
		}
		loads[c] = low
	}
	return loads
}

// stationPrice charges whole stations, renewed when their life ends, where
// the plan says dedicated; by_use is in the cost per look.
func (c *Combination) stationPrice(looks, quantity float64) float64 {
	s := c.gate.option.Station
	if s.Charge != plan.Dedicated || s.Price == 0 || looks == 0 {
		return 0
	}
	lives := math.Max(1, ceil(c.periods(quantity)/(s.LifeYears*c.model.plan.WorkingTime.PeriodsPerYear)))
	return s.Price * lives * c.gate.count(c.load(looks, quantity))
}

// Stations is the need at a quantity of good units shipped. Units are taken to
// arrive at random at a steady rate and a look to take a constant time.
func (c *Combination) Stations(quantity float64) (Stations, error) {
	f := c.Flow(quantity)
	looks := f.Looks * c.startsOf(&f, quantity)
	if looks == 0 || math.IsInf(looks, 0) || c.gate.hours == 0 {
		return Stations{}, nil
	}
	service_s, load := 3600*c.gate.hours, c.load(looks, quantity)
	s := Stations{TaktS: service_s / load, Load: load, Count: int(c.gate.count(load))}
	s.WaitAsked = float64(s.Count) > math.Floor(load+1e-9)+1
	if s.Count > 20*tableStations {
		return s, nil // the wait is below any figure that matters
	}
	wait, err := queueing.WaitMDc(s.Count, load)
	if err != nil {
		return s, err
	}
	s.WaitS = wait * service_s
	s.Waiting, err = queueing.ErlangC(s.Count, load)
	return s, err
}
