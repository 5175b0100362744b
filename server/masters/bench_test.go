package masters

import (
	"context"
	"fmt"
	"io"
	"log/slog"
	"path/filepath"
	"testing"
	"time"

	"lapgate/pipeline"
	"lapgate/server/ledger"
)

// What the gate costs a unit whose recipe names four masters, with a year of showings.
func BenchmarkEnter(b *testing.B) {
	ctx := context.Background()
	store, err := ledger.Open(ctx, filepath.Join(b.TempDir(), "ledger.db"))
	if err != nil {
		b.Fatal(err)
	}
	defer store.Close()
	r := &pipeline.Recipe{Part: "disc-25", TextHash: "sha256:aa"}
	for i := range 4 {
		r.Masters = append(r.Masters, pipeline.MasterSpec{Unit: fmt.Sprint("M", i), Expect: pipeline.Accept, EveryMinutes: 480})
	}
	id := pipeline.Identity{Part: "disc-25", Lot: "L1", Unit: "u", Line: "A", Station: "A1", Attempt: 1, Purpose: pipeline.Production}
	gate := &Gate{Ledger: store, Now: time.Now, Log: slog.New(slog.NewTextHandler(io.Discard, nil))}
	for i := range 1000 {
		in := ledger.Inspection{Identity: id, Digest: fmt.Sprint(i), Captured: time.Now(), Judgement: pipeline.Judgement{Verdict: pipeline.Accept, Recipe: r.TextHash}}
		in.Unit, in.Purpose, in.Attempt = r.Masters[i%4].Unit, pipeline.Master, i+1
		in.Check = gate.Check(r, in, nil)
		if _, _, err := store.Record(ctx, in); err != nil {
			b.Fatal(err)
		}
	}
	for b.Loop() {
		holds, leave, err := gate.Enter(ctx, id, r, nil)
		if err != nil || len(holds) != 0 {
			b.Fatal(holds, err)
		}
		leave()
	}
}
