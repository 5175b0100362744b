package fused

import (
	"reflect"
	"testing"

	"lapgate/pipeline/raster"
)

// Crowded frames lead the first look astray in some cells; the candidates found once more
// around them must give all that looking at every pixel gives.
func TestNothingIsMissedWhereTheFirstLookWasOff(t *testing.T) {
	again := 0
	for seed := range uint64(12) {
		l := look{format: raster.Mono8, noise: 1.6, digs: 150, scratches: 25, seed: 100 + seed, width: 803, height: 522, circle: seed%3 == 0}
		s, set := draw(l), usual()
		set.Low, set.High = 3, 4.5
		got := find(t, l, s, set)
		again += got.RowsAgain
		set.SNR = true
		want := find(t, l, s, set)
		if len(got.Blobs) != len(want.Blobs) {
			t.Errorf("seed %d: %d blobs, want %d", seed, len(got.Blobs), len(want.Blobs))
			continue
		}
		for i := range want.Blobs {
			if !reflect.DeepEqual(got.Blobs[i].Spans, want.Blobs[i].Spans) {
				t.Errorf("seed %d: blob %d lies at %+v, want %+v", seed, i, got.Blobs[i].Blemish, want.Blobs[i].Blemish)
			}
		}
	}
	if again == 0 {
		t.Error("no first look was off: these frames test nothing")
	}
	t.Logf("%d grid rows passed again", again)
}
