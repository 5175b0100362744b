package ledger

import (
	"context"
	"fmt"
	"testing"
	"time"

	"lapgate/pipeline"
)

var noon = time.Date(2026, 3, 2, 12, 0, 0, 0, time.UTC)

// disc is an inspection of one mirror disc of the demo shop.
func disc(unit string, attempt int, v pipeline.Verdict, at time.Time, reasons ...string) Inspection {
	id := pipeline.Identity{Part: "disc-25", Revision: "B", Surface: "front", Process: "pitch", Lot: "L7", Unit: unit,
		Line: "A", Station: "final", Attempt: attempt, Purpose: pipeline.Production}
	j := pipeline.Judgement{Verdict: v, Recipe: "sha256:aa", DetectionHash: "sha256:bb", JudgingHash: "sha256:cc",
		ProgramVersion: "1.0.0", StageVersions: map[string]string{"blobs": "1"}}
	for i, r := range reasons {
		j.Reasons = append(j.Reasons, pipeline.Reason{Name: r, Verdict: v, Text: r, DefectID: i + 1})
	}
	// 0x010C0047 is PFNC Mono12p.
	header := pipeline.FrameHeader{Identity: id, Capture: pipeline.Capture{Format: 0x010C0047, Width: 4000, Height: 3000}, Stride: 6000, View: "ring", Count: 1, CameraID: "cam1", Captured: at, CRC32C: 7}
	return Inspection{Identity: id, Digest: fmt.Sprintf("d-%s-%d", unit, attempt), RequestID: "r-" + unit, Captured: at,
		Judged: at.Add(40 * time.Millisecond), LatencyMS: 31.5, Judgement: j,
		Evidence: pipeline.Evidence{Coverage: 0.998, Defects: defects(2), Views: []pipeline.ViewEvidence{
			{Name: "ring", UMPerPx: 8, Calibration: "sha256:dd", Coverage: pipeline.Coverage{Share: 0.998},
				Frames: []pipeline.FrameEvidence{{Header: header, Stored: "disc-25/L7/" + unit}}}}}}
}

func defects(n int) []pipeline.Defect {
	out := make([]pipeline.Defect, n)
	for i := range out {
		out[i] = pipeline.Defect{ID: i + 1, Kind: pipeline.Dig, View: "ring", Zone: "clear", AreaPx: 37 + i, AreaUM2: 2368.25,
			LengthUM: 61.5, WidthUM: 52.25, DiameterUM: 54.91, Flux: 18211.5, PeakDN: 612.25, PeakSigma: 9.75, SNR: 21.25, SlopeMrad: 1.75}
	}
	return out
}

func mustRecord(t testing.TB, s *Store, in Inspection) Inspection {
	t.Helper()
	stored, fresh, err := s.Record(context.Background(), in)
	if err != nil || !fresh {
		t.Fatalf("record %s: fresh %v, error %v", in.Unit, fresh, err)
	}
	return stored
}

func wantKind(t testing.TB, err error, k pipeline.ErrorKind) {
	t.Helper()
	if err == nil || pipeline.KindOf(err) != k {
		t.Fatalf("got error %v of kind %d, want kind %d", err, pipeline.KindOf(err), k)
	}
}

func rowsIn(t testing.TB, s *Store, table string) int {
	t.Helper()
	var n int
	if err := s.reader.QueryRow("SELECT COUNT(*) FROM " + table).Scan(&n); err != nil {
		t.Fatal(err)
	}
	return n
}
