package volume

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"

	"lapgate/server/volume/cost"
	"lapgate/server/volume/plan"
)

// twoWays is a plan of two processes and one full inspection.
func twoWays() *plan.Plan {
	p := planOf(simple("a", 2000, 12, .8), simple("b", 20000, 11, .9))
	p.Inspections = []plan.Inspection{full("all", value(0), value(0))}
	p.Outcomes.EscapeCost = 40
	return p
}

// setTruth writes certain shares into the plan.
func setTruth(p *plan.Plan, ya, yb, falseReject, miss float64) {
	p.Processes[0].Yield, p.Processes[1].Yield = plan.Yield{Value: &ya}, plan.Yield{Value: &yb}
	p.Inspections[0].FalseReject, p.Inspections[0].Miss = value(falseReject), value(miss)
}

// observe replaces the truth by counts drawn from it.
func observe(p *plan.Plan, src rand.Source, ya, yb, falseReject, miss float64) {
	sample := func(n int, share float64) *plan.Count {
		return &plan.Count{K: int(distuv.Binomial{N: float64(n), P: share, Src: src}.Rand()), N: n}
	}
	p.Processes[0].Yield, p.Processes[1].Yield = plan.Yield{Count: sample(150, ya)}, plan.Yield{Count: sample(120, yb)}
	p.Inspections[0].FalseReject = plan.Share{Count: sample(200, falseReject)}
	p.Inspections[0].Miss = plan.Share{Count: sample(80, miss)}
}

// meeting follows where the two combinations of a plan meet.
type meeting struct {
	*follower
	knowledge *plan.Knowledge
	x         followed
}

func meetingOf(t *testing.T, p *plan.Plan, near float64) *meeting {
	t.Helper()
	k, err := plan.Know(p)
	if err != nil {
		t.Fatal(err)
	}
	m, err := cost.NewModel(p)
	if err != nil {
		t.Fatal(err)
	}
	return &meeting{newFollower(m, [][2]int{{0, 0}, {1, 0}}, 10, 1e6), k, followed{0, 1, near}}
}

func (m *meeting) distribution(t *testing.T, seed uint64, draws int) *CrossingDistribution {
	t.Helper()
	at, err := m.follow(context.Background(), draw(m.knowledge, seed, draws), []followed{m.x}, []int{draws}, func() {})
	if err != nil {
		t.Fatal(err)
	}
	return distribution(at[0], 0.90)
}

// In each of 2 000 worlds the true shares are drawn, counts are drawn from
// them, and the 90 % interval of the crossover given that one exists is set
// against the true crossover. The band 87-93 % allows for the prior (Jeffreys,
// while the truths are spread evenly) and for 200 draws per interval.
func TestCrossoverIntervalCoverage(t *testing.T) {
	const worlds, draws = 2000, 200
	src := rand.NewPCG(20310501, 1)
	even := rand.New(src)
	covered, judged, without := 0, 0, 0.0
	for world := range worlds {
		ya, yb := .72+.13*even.Float64(), .84+.13*even.Float64()
		falseReject, miss := .005+.03*even.Float64(), .02+.08*even.Float64()
		p := twoWays()
		setTruth(p, ya, yb, falseReject, miss)
		m := meetingOf(t, p, 7000)
		truth := m.knowledge.World(m.knowledge.Values())
		at := m.scene().enter(&truth).nearest(m.x)
		observe(p, src, ya, yb, falseReject, miss)
		d := meetingOf(t, p, 7000).distribution(t, uint64(world), draws)
		without += 1 - d.Share
		if math.IsNaN(at) || d.Share == 0 {
			continue
		}
		judged++
		if d.Low <= at && at <= d.High {
			covered++
		}
	}
	coverage := float64(covered) / float64(judged)
	t.Logf("covered %.4f of %d worlds with a crossover of %d; share of draws without one %.4f", coverage, judged, worlds, without/worlds)
	if coverage < .87 || coverage > .93 || judged < 1900 {
		t.Errorf("coverage %.4f of %d worlds; want 0.87 to 0.93 of at least 1900", coverage, judged)
	}
}

// The delta method agrees with the draws where the counts are large.
func TestDeltaMethodAgreesForLargeCounts(t *testing.T) {
	p := twoWays()
	p.Processes[0].Yield = plan.Yield{Count: &plan.Count{K: 16000, N: 20000}}
	p.Processes[1].Yield = plan.Yield{Count: &plan.Count{K: 18000, N: 20000}}
	p.Inspections[0].FalseReject, p.Inspections[0].Miss = count(400, 20000), count(1000, 20000)
	m := meetingOf(t, p, 7000)
	d := m.distribution(t, 3, 4000)
	near(t, "sd by delta over sd of draws", m.deltas(m.knowledge, []followed{m.x})[0]/d.SD, 1, 0.06)
	near(t, "share", d.Share, 1, 0)
}
