package server_test

import (
	"context"
	"fmt"
	"path/filepath"
	"strings"
	"testing"

	"lapgate/pipeline"
	"lapgate/plugins/stagetest"
	"lapgate/proto/inspectpb"
)

// A picture that was judged before the server was started anew does not pass for another
// unit; the unit it is of gets its stored verdict.
func TestARepeatedPictureIsKnownAfterAStart(t *testing.T) {
	scene := stagetest.Render(t, stagetest.SmallScene())
	o := rigOptions{recipe: renderedRecipe, calibrations: scene.Calibrations, dsn: filepath.Join(t.TempDir(), "ledger.db")}
	first := scene.Unit(0)
	if v := newRig(t, o).inspectRendered(scene, first); v.Judgement.Verdict != accept {
		t.Fatal(v.Judgement)
	}
	r := newRig(t, o)
	u := scene.Unit(0)
	f, err := scene.Frame(&u, "ring")
	must(t, err)
	h := f.Header
	h.Unit = "T099"
	resp, err := r.InspectUnit(context.Background(), &inspectpb.InspectUnitRequest{Frames: []*inspectpb.Frame{{Header: inspectpb.FromFrameHeader(h), Data: f.Raw.Data}}})
	must(t, err)
	if j := resp.Verdict.Judgement; j.Verdict != hold || !strings.Contains(fmt.Sprint(j.Reasons), "not proven: "+pipeline.ProofLive) || !strings.Contains(fmt.Sprint(j.Reasons), "bit for bit the one of unit T001") {
		t.Errorf("as another unit: %v", j)
	}
	if v := r.inspectRendered(scene, first); !v.Stored || v.Judgement.Verdict != accept {
		t.Errorf("the unit itself: stored %v, %v", v.Stored, v.Judgement)
	}
	if v := r.inspectRendered(scene, scene.Unit(1)); v.Judgement.Verdict != accept {
		t.Errorf("a new picture: %v", v.Judgement)
	}
}
