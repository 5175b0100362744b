package ledger

import (
	"context"
	"fmt"
	"math/rand/v2"
	"path/filepath"
	"testing"
	"time"

	"lapgate/pipeline"
)

func onEachBench(b *testing.B, bench func(*testing.B, *Store)) {
	b.Run("sqlite", func(b *testing.B) { bench(b, openAt(b, filepath.Join(b.TempDir(), "ledger.db"))) })
	b.Run("postgresql", func(b *testing.B) { bench(b, openAt(b, server.database(b))) })
}

func sample(i int) Inspection {
	in := disc(fmt.Sprint(i), 1, pipeline.Reject, noon.Add(time.Duration(i)*time.Second), "dig size")
	in.Evidence.Defects = scattered(20)
	in.Evidence.Views[0].Defects = scattered(20)
	return in
}

// BenchmarkRecord is one unit with 20 defects, before and after merge, per transaction.
func BenchmarkRecord(b *testing.B) {
	onEachBench(b, func(b *testing.B, s *Store) {
		i := 0
		for b.Loop() {
			mustRecord(b, s, sample(i))
			i++
		}
		b.ReportMetric(float64(b.N)/b.Elapsed().Seconds(), "units/s")
	})
}

// BenchmarkRepairBucket recounts a bucket of 900 units, one a second.
func BenchmarkRepairBucket(b *testing.B) {
	onEachBench(b, func(b *testing.B, s *Store) {
		for i := range 900 {
			mustRecord(b, s, sample(i))
		}
		for i := 0; b.Loop(); i++ {
			b.StopTimer()
			mustRecord(b, s, disc(fmt.Sprint("more-", i), 1, pipeline.Accept, noon))
			b.StartTimer()
			if err := s.Repair(context.Background()); err != nil {
				b.Fatal(err)
			}
		}
	})
}

// BenchmarkEvidence shows what evidence of 20 defects, kept before and after the merge,
// takes on disk.
func BenchmarkEvidence(b *testing.B) {
	in := sample(1)
	var t texts
	for b.Loop() {
		var err error
		if t, err = encode(in); err != nil {
			b.Fatal(err)
		}
	}
	text, err := unzip(t.evidence)
	if err != nil {
		b.Fatal(err)
	}
	b.ReportMetric(float64(len(text)), "json_B")
	b.ReportMetric(float64(len(t.evidence)), "stored_B")
}

// scattered gives every defect measures of its own, as real ones have.
func scattered(n int) []pipeline.Defect {
	r := rand.New(rand.NewPCG(1, 2))
	out := defects(n)
	for i := range out {
		d := &out[i]
		for _, v := range []*float64{&d.AreaUM2, &d.LengthUM, &d.WidthUM, &d.DiameterUM, &d.LengthPx, &d.WidthPx, &d.DiameterPx,
			&d.AngleDeg, &d.Flux, &d.PeakDN, &d.PeakSigma, &d.SNR, &d.EdgeDistanceUM} {
			*v = r.Float64() * 1000
		}
	}
	return out
}
