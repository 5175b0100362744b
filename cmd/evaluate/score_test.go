package main

import (
	"math"
	"testing"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

func square(x, y, side float64) quad {
	return quad{{X: x, Y: y}, {X: x + side, Y: y}, {X: x + side, Y: y + side}, {X: x, Y: y + side}}
}

// Two boxes; one defect on both, one beside: two found, one false, F1 2·2/(2·2+1) = 0.8.
func TestScoreBoxes(t *testing.T) {
	truth := []truthBox{{quad: square(0, 0, 4)}, {quad: square(10, 0, 4)}}
	defects := [][]raster.Span{{{Y: 2, X0: 3, X1: 12}}, {{Y: 8, X0: 0, X1: 20}}}
	got := scoreBoxes(truth, defects)
	if got != (boxScore{found: 2, falses: 1}) || math.Abs(got.f1()-0.8) > 1e-12 {
		t.Errorf("got %+v, F1 %g", got, got.f1())
	}
	c := creditsOf(truth, make([]pipeline.Defect, 2), defects)
	if again := c.score(func(pipeline.Defect) bool { return true }); again != got {
		t.Errorf("by credits got %+v, want %+v", again, got)
	}
	if none := scoreBoxes(truth, nil); none != (boxScore{missed: 2}) {
		t.Errorf("of no defects got %+v", none)
	}
}

func TestQuadTurnedEitherWay(t *testing.T) {
	q := quad{{X: 5, Y: 0}, {X: 10, Y: 5}, {X: 5, Y: 10}, {X: 0, Y: 5}}
	back := quad{q[3], q[2], q[1], q[0]}
	for _, p := range []struct {
		x, y float64
		in   bool
	}{{5, 5, true}, {1, 1, false}, {9, 9, false}, {5, 0, true}} {
		if q.contains(p.x, p.y) != p.in || back.contains(p.x, p.y) != p.in {
			t.Errorf("(%g, %g): want %v", p.x, p.y, p.in)
		}
	}
}

// Hanley and McNeil's measure: pairs rightly ordered, ties half.
func TestAUROC(t *testing.T) {
	if a := auroc([]float64{3, 2}, []float64{1, 2}); a != 0.875 {
		t.Errorf("got %g, want 3.5 of 4 pairs", a)
	}
}

// The percentile interval of a mean of many is close to ±1.96 standard errors.
func TestBootstrap(t *testing.T) {
	const n = 400
	i := bootstrap(n, func(drawn []int) float64 {
		sum := 0.0
		for _, k := range drawn {
			sum += float64(k % 2)
		}
		return sum / n
	})
	if half := i.Width() / 2; math.Abs(half-1.96*0.5/math.Sqrt(n)) > 0.005 {
		t.Errorf("half width %g, want about %g", half, 1.96*0.5/math.Sqrt(n))
	}
}

func TestMedianInterval(t *testing.T) {
	var v []float64
	for i := range 101 {
		v = append(v, float64(i))
	}
	if i := medianInterval(v); median(v) != 50 || i.Low > 42 || i.Low < 38 || i.High < 58 || i.High > 62 {
		t.Errorf("median %g, interval %+v; ranks 40 to 60 hold it with 95 %% (binomial)", median(v), i)
	}
}

// Of twenty clean values at most one may pass a limit for 5 %.
func TestLimitForFalseAlarms(t *testing.T) {
	var clean []float64
	for i := range 20 {
		clean = append(clean, 3+0.51*float64(i))
	}
	limit := limitFor(clean, 0.05)
	above := 0
	for _, v := range clean {
		if v > limit {
			above++
		}
	}
	if above != 1 || limit < 12.18 || limit > 12.3 {
		t.Errorf("limit %g lets %d of 20 pass, want 1 and 12.2: 3 + 18·0.51 = 12.18", limit, above)
	}
}

func TestExposuresAreParted(t *testing.T) {
	var list []tile
	for _, f := range []string{"exp2_num_20.jpg", "exp1_num_10.jpg", "exp1_num_30.jpg", "exp3_num_50.jpg", "exp6_num_25.jpg"} {
		list = append(list, tile{picture: picture{file: f, group: "G"}})
	}
	list = append(list, tile{picture: picture{file: "exp4_num_60.jpg", group: "H"}})
	got, err := exposures(list)
	if err != nil || len(got) != 3 || len(got[0]) != 3 || len(got[1]) != 2 || len(got[2]) != 1 || got[0][2].file != "exp6_num_25.jpg" {
		t.Errorf("got %v, %v: want exposures 1 2 6, then 1 3, then 4 of another group", got, err)
	}
	if _, err := exposures([]tile{{picture: picture{file: "a.jpg"}}}); err == nil {
		t.Error("a name without exposure is taken")
	}
}
