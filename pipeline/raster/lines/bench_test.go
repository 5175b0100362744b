package lines

import (
	"fmt"
	"testing"
)

// BenchmarkFind searches a frame of white noise of 12 megapixels.
func BenchmarkFind(b *testing.B) {
	p := noise(4000, 3000, 1)
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
