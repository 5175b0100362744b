package ledger

import (
	"context"
	"fmt"
	"slices"
	"testing"
	"time"

	"lapgate/pipeline"
)

func TestAlarmsAreKept(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		first, err := s.RaiseAlarm(ctx, Alarm{Name: pipeline.ReasonDirt, Line: "A", Station: "final", View: "ring", XPx: 12.5, YPx: 7, Units: []string{"1", "2"}, Text: "dirt", RaisedBy: 5, Raised: noon})
		if err != nil || first.ID == 0 {
			t.Fatal(first, err)
		}
		second, err := s.RaiseAlarm(ctx, Alarm{Name: pipeline.ReasonDirt, Line: "B", Station: "final", View: "bar", Raised: noon.Add(time.Hour)})
		if err != nil {
			t.Fatal(err)
		}
		list, err := s.Alarms(ctx, AlarmFilter{}, 0)
		if err != nil || len(list) != 2 || list[0].ID != second.ID || !list[1].Open() || list[1].XPx != 12.5 || !slices.Equal(list[1].Units, []string{"1", "2"}) || list[1].RaisedBy != 5 || !list[1].Raised.Equal(noon) {
			t.Fatalf("%+v, %v", list, err)
		}
		if err := s.ClearAlarm(ctx, first.ID, 9, noon.Add(time.Minute)); err != nil {
			t.Fatal(err)
		}
		if err := s.ClearAlarm(ctx, first.ID, 10, noon.Add(2*time.Minute)); err != nil { // another server was faster
			t.Fatal(err)
		}
		if list, err = s.Alarms(ctx, AlarmFilter{OpenOnly: true}, 0); err != nil || len(list) != 1 || list[0].ID != second.ID {
			t.Errorf("open: %+v, %v", list, err)
		}
		if list, err = s.Alarms(ctx, AlarmFilter{Line: "A", Station: "final"}, 1); err != nil || len(list) != 1 || list[0].ClearedBy != 9 || !list[0].Cleared.Equal(noon.Add(time.Minute)) {
			t.Errorf("line A: %+v, %v", list, err)
		}
	})
}

func TestLatestSampleAndFrames(t *testing.T) {
	onEach(t, func(t *testing.T, s *Store) {
		ctx := context.Background()
		for i := range 40 {
			in := disc(fmt.Sprint(i), 1, pipeline.Accept, noon.Add(time.Duration(i)*time.Minute))
			in.Evidence.Views[0].Frames[0].Header.CRC32C = uint32(100 + i)
			if i%4 == 3 {
				in.Line = "B"
				in.Evidence.Views[0].Frames[0].Header.Line = "B"
			}
			mustRecord(t, s, in)
		}
		list, err := s.Latest(ctx, "A", "final", 3)
		if err != nil || len(list) != 3 || list[0].Unit != "36" || list[2].Unit != "38" || len(list[2].Evidence.Defects) != 2 {
			t.Errorf("latest: %+v, %v", list, err)
		}
		list, err = s.Sample(ctx, "A", "final", noon.Add(20*time.Minute), 100)
		if err != nil || len(list) != 15 || list[0].Unit != "20" || list[14].Unit != "38" {
			t.Errorf("all since a time: %d, %v", len(list), err)
		}
		if list, err = s.Sample(ctx, "A", "final", noon, 5); err != nil || len(list) >= 20 { // of 30, each with probability 1/6
			t.Errorf("sample: %d, %v", len(list), err)
		}
		frames, err := s.FramesBefore(ctx, "A", "final", "ring", 4)
		if err != nil || len(frames) != 4 || frames[0].CRC32C != 134 || frames[3].CRC32C != 138 || frames[3].Unit != "38" {
			t.Errorf("frames: %+v, %v", frames, err)
		}
		if frames, err = s.FramesBefore(ctx, "A", "final", "bar", 4); err != nil || len(frames) != 0 {
			t.Errorf("another view: %+v, %v", frames, err)
		}
	})
}
