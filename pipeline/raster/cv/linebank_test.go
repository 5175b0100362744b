//go:build gocv_specific_modules

package cv

import (
	"testing"

	"lapgate/pipeline/raster"
)

// A line of one sigma a pixel stands out from a plane of zeros by about the root of the
// kernel's length where its orientation is one of the bank's, and nowhere else.
func TestLineBankFindsALine(t *testing.T) {
	p := raster.NewPlane(200, 160)
	for x := 40; x < 140; x++ {
		p.Set(x, 80, 1)
	}
	b, err := NewLineBank(200, 160, 16, 31)
	if err != nil {
		t.Fatal(err)
	}
	defer b.Close()
	for threshold, want := range map[float32][2]int{5.4: {70, 72}, 5.7: {0, 0}} { // √31 = 5.57
		if n, err := b.Run(p, threshold); err != nil || n < want[0] || n > want[1] {
			t.Errorf("%d pixels above %g, error %v; want %v", n, threshold, err, want)
		}
	}
	if _, err := b.Run(raster.NewPlane(100, 160), 5); err == nil {
		t.Error("a plane of another size was taken")
	}
}
