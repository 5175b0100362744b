package masters

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"
	"time"

	"lapgate/server/ledger"
)

// fading is a master shown once a shift of 8 h while the lamp loses a share a shift: its
// peak falls with the light, and every showing measures it with 1 % of noise. Newest first.
func fading(rng *rand.Rand, shifts int, loss float64, low float64) []ledger.MasterCheck {
	var out []ledger.MasterCheck
	for i := range shifts {
		v := 12 * math.Pow(1-loss, float64(i)) * (1 + 0.01*rng.NormFloat64())
		c := ledger.MasterCheck{Master: "M1", Recipe: "sha256:aa", Measure: "peak_sigma", Value: &v, Low: &low, Result: ledger.CheckPass,
			At: at(6, 0).Add(time.Duration(i) * 8 * time.Hour)}
		if v < low {
			c.Result = ledger.CheckFail
		}
		out = append([]ledger.MasterCheck{c}, out...)
	}
	return out
}

// A lamp that loses 2 % a shift is warned of before the first master is missed, and a
// steady one hardly ever.
func TestDriftWarnsBeforeTheFirstMissedMaster(t *testing.T) {
	const runs = 300
	late, early := 0, 0
	for seed := range uint64(runs) {
		rng := rand.New(rand.NewPCG(seed, 1))
		history := fading(rng, 40, 0.02, 9.5) // 0.98^n falls below 9.5/12 at the 12th shift
		warned := 0
		for n := 1; n <= len(history); n++ {
			soFar := history[len(history)-n:]
			if soFar[0].Result == ledger.CheckFail {
				break
			}
			if Drift(soFar, time.Time{}) != "" {
				warned = n
				break
			}
		}
		if warned == 0 {
			late++
		}
		if warned > 0 && warned < 5 {
			early++
		}
	}
	if late > 0 {
		t.Errorf("%d of %d lamps were not warned of before a master was missed", late, runs)
	}
	if early > runs/20 {
		t.Errorf("%d of %d lamps were warned of within 4 showings, more than chance", early, runs)
	}
	false20 := 0
	for seed := range uint64(runs) {
		if Drift(fading(rand.New(rand.NewPCG(seed, 2)), 20, 0, 9.5), time.Time{}) != "" {
			false20++
		}
	}
	if false20 > runs/20 {
		t.Errorf("%d of %d steady lamps were warned of", false20, runs)
	}
}

func TestDriftComparesLikeWithLike(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 1))
	history := fading(rng, 10, 0.02, 9.5)
	text := Drift(history, time.Time{})
	if !strings.Contains(text, "peak_sigma of master M1 went from") || !strings.Contains(text, "meets its bound 9.5 at 2026-03-0") {
		t.Errorf("warning %q", text)
	}
	if text := Drift(history, history[3].At); text != "" {
		t.Errorf("three showings since the lamp was changed: %q, want none", text)
	}
	for i := 3; i < len(history); i++ {
		history[i].Conditions = map[string]string{"lamp of view ring": "L0"}
	}
	if text := Drift(history, time.Time{}); text != "" {
		t.Errorf("three showings with this lamp: %q, want none", text)
	}
	if text := Drift(nil, time.Time{}); text != "" {
		t.Errorf("no showing: %q", text)
	}
}
