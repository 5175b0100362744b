package lines

import (
	"fmt"
	"math/rand/v2"
	"testing"
)

// BenchmarkFind searches a frame of white noise of 12 megapixels with 20 faint scratches.
func BenchmarkFind(b *testing.B) {
	p, r := noise(4000, 3000, 1), rand.New(rand.NewPCG(2, 2))
	for range 20 {
		g := random(r, 4000, 3000, 300)
		draw(p, g.x0, g.y0, g.x1, g.y1, 1, 1)
	}
	for _, half := range []bool{false, true} {
		s := Default
		s.Half = half
		b.Run(fmt.Sprintf("half=%v", half), func(b *testing.B) {
			var f Finder
			for b.Loop() {
				if _, err := f.Find(p, Whole(4000, 3000), nil, s); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}
