package merge

import (
	"context"
	"math/rand/v2"
	"testing"

	"lapgate/pipeline"
)

// BenchmarkFullViews merges two views with as many defects as a view may have.
func BenchmarkFullViews(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 2))
	var views []*pipeline.Item
	for _, name := range []string{"ring", "bar"} {
		var defects []pipeline.Defect
		for i := range pipeline.MaxDefects {
			x, y := 4000*r.Float64(), 3000*r.Float64()
			if i%4 == 0 {
				defects = append(defects, scratch(x, x+100, y, 20, 9))
			} else {
				defects = append(defects, dig(x, y, 80, 9))
			}
		}
		views = append(views, view(name, defects...))
	}
	for b.Loop() {
		if err := New(Default).Run(context.Background(), &pipeline.Item{Views: views}); err != nil {
			b.Fatal(err)
		}
	}
}
