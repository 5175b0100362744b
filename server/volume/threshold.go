package volume

import (
	"context"
	"math"
	"math/rand/v2"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"

	"lapgate/server/volume/cost"
	"lapgate/server/volume/plan"
)

// ThresholdResult is the cost per good unit against a setting. The drawing's
// limit stays binding: a cheaper setting that is looser may not be used.
type ThresholdResult struct {
	Process      string          `json:"process"`
	Inspection   string          `json:"inspection"`
	Good         float64         `json:"good_units"`
	Unit         string          `json:"unit"`
	DrawingLimit float64         `json:"drawing_limit"`
	Settings     []ThresholdCost `json:"settings"`
	Best         int             `json:"best"`         // least cost of all
	BestAllowed  int             `json:"best_allowed"` // not looser than the drawing; -1 if none
	Low          float64         `json:"low"`          // interval of the least-cost setting over the draws
	High         float64         `json:"high"`
}

// ThresholdCost is one setting.
type ThresholdCost struct {
	plan.ThresholdRow
	Cost              Money   `json:"cost"`
	Low               Money   `json:"low"`
	High              Money   `json:"high"`
	EscapesPerMillion float64 `json:"escapes_per_million"`
	Allowed           bool    `json:"allowed"`
}

func (e *evaluation) bestThreshold(ctx context.Context) error {
	t := e.plan.Threshold
	if t == nil {
		return nil
	}
	if len(t.Rows) == 0 {
		return &plan.Problem{Path: "threshold.file", Message: "the table was not read"}
	}
	r := &ThresholdResult{Process: t.Process, Inspection: t.Inspection, Good: t.Quantity, Unit: t.Unit, DrawingLimit: t.DrawingLimit}
	s := &settings{e: e, at: [2]int{e.plan.ProcessIndex(t.Process), e.plan.InspectionIndex(t.Inspection)}, quantity: t.Quantity}
	e.settingsAtCounts(r, s)
	if err := e.settingsOverDraws(ctx, r, s); err != nil {
		return err
	}
	e.result.Threshold = r
	return nil
}

// settings evaluates one combination with other misses and false rejects.
type settings struct {
	e        *evaluation
	at       [2]int
	quantity float64
}

func (s *settings) combination(w plan.World, falseReject, miss float64) *cost.Combination {
	w.FalseReject, w.Miss = slices.Clone(w.FalseReject), slices.Clone(w.Miss)
	w.FalseReject[s.at[1]], w.Miss[s.at[1]] = falseReject, miss
	return s.e.model.Combination(s.at[0], s.at[1], &w)
}

func (e *evaluation) settingsAtCounts(r *ThresholdResult, s *settings) {
	rows := e.plan.Threshold.Rows
	upwards := plan.LooserUpwards(rows)
	r.BestAllowed = -1
	for i, row := range rows {
		c := s.combination(e.truth, share(row.FalseRejects, row.Conforming), share(row.Misses, row.Nonconforming))
		looser := row.Setting > r.DrawingLimit
		if !upwards {
			looser = row.Setting < r.DrawingLimit
		}
		r.Settings = append(r.Settings, ThresholdCost{ThresholdRow: row, Cost: Money(c.PerGood(s.quantity)),
			EscapesPerMillion: c.EscapesPerMillion(s.quantity), Allowed: !looser})
		if r.Settings[i].Cost < r.Settings[r.Best].Cost {
			r.Best = i
		}
		if !looser && (r.BestAllowed < 0 || r.Settings[i].Cost < r.Settings[r.BestAllowed].Cost) {
			r.BestAllowed = i
		}
	}
}

func share(k, n int) float64 { return float64(k) / float64(n) }

// settingsOverDraws finds the least-cost setting in every world. The settings
// judged the same units, so their shares move together: a Dirichlet over the
// steps between neighbouring settings, one prior count spread evenly over the
// steps (Perks 1947).
func (e *evaluation) settingsOverDraws(ctx context.Context, r *ThresholdResult, s *settings) error {
	n := len(r.Settings)
	best, costs := make([]float64, len(e.worlds)), make([][]float64, n)
	for i := range costs {
		costs[i] = make([]float64, len(e.worlds))
	}
	misses, falseRejects := e.drawSteps(n)
	err := each(ctx, len(e.worlds), func(d int) {
		least := math.Inf(1)
		for i := range costs {
			costs[i][d] = s.combination(e.worlds[d], falseRejects[d][i], misses[d][i]).PerGood(s.quantity)
			if costs[i][d] < least {
				least, best[d] = costs[i][d], r.Settings[i].Setting
			}
		}
	})
	if err != nil {
		return err
	}
	level := e.plan.Uncertainty.Level
	low, high := (1-level)/2, (1+level)/2
	r.Low, r.High = quantiles(best, low, high)
	for i := range costs {
		a, b := quantiles(costs[i], low, high)
		r.Settings[i].Low, r.Settings[i].High = Money(a), Money(b)
	}
	return nil
}

// drawSteps draws the miss and false-reject shares of all settings, per world.
func (e *evaluation) drawSteps(n int) (misses, falseRejects [][]float64) {
	rows := e.plan.Threshold.Rows
	missed, thrown := make([]int, n), make([]int, n)
	for i, row := range rows {
		missed[i], thrown[i] = row.Misses, row.FalseRejects
	}
	src := rand.NewPCG(e.plan.Uncertainty.Seed, 1<<32)
	for range e.worlds {
		misses = append(misses, drawCumulative(missed, rows[0].Nonconforming, src))
		falseRejects = append(falseRejects, drawCumulative(thrown, rows[0].Conforming, src))
	}
	return misses, falseRejects
}

// drawCumulative draws shares for counts that rise or fall from setting to
// setting, of total units.
func drawCumulative(counts []int, total int, src rand.Source) []float64 {
	n := len(counts)
	falling := counts[n-1] < counts[0]
	shares, before, sum := make([]float64, n), 0, 0.0
	prior := 1 / float64(n+1)
	for j := range n {
		i := j
		if falling {
			i = n - 1 - j
		}
		sum += distuv.Gamma{Alpha: float64(counts[i]-before) + prior, Beta: 1, Src: src}.Rand()
		shares[i], before = sum, counts[i]
	}
	sum += distuv.Gamma{Alpha: float64(total-before) + prior, Beta: 1, Src: src}.Rand()
	for i := range shares {
		shares[i] /= sum
	}
	return shares
}
