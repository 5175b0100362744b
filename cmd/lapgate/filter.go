package main

import (
	"fmt"
	"time"

	"github.com/spf13/pflag"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

// filterFlags choose inspections.
type filterFlags struct {
	part, process, lot, line, station, recipe, purpose, from, to string
}

func (f *filterFlags) add(fs *pflag.FlagSet) {
	for _, w := range []struct {
		at         *string
		name, text string
	}{
		{&f.part, "part", "only this part"}, {&f.process, "process", "only this process"}, {&f.lot, "lot", "only this lot"},
		{&f.line, "line", "only this line"}, {&f.station, "station", "only this station"},
		{&f.recipe, "recipe", "only judged by the recipe with this hash"},
		{&f.from, "from", "captured at or after: 2026-03-01, 2026-03-01T06:15 (local time) or RFC 3339"},
		{&f.to, "to", "captured before, written the same way"},
	} {
		fs.StringVar(w.at, w.name, "", w.text)
	}
	fs.StringVar(&f.purpose, "purpose", string(pipeline.Production), "production, master, study, setup or recheck")
}

func (f *filterFlags) filter() (*inspectpb.Filter, error) {
	from, err := parseTime("from", f.from)
	if err != nil {
		return nil, err
	}
	to, err := parseTime("to", f.to)
	if err != nil {
		return nil, err
	}
	if !from.IsZero() && !to.IsZero() && !from.Before(to) {
		return nil, pipeline.Invalid("to: got %s, want a time after --from (%s)", f.to, f.from)
	}
	purpose := inspectpb.FromPurpose(pipeline.Purpose(f.purpose))
	if purpose == inspectpb.Purpose_PURPOSE_UNSPECIFIED {
		return nil, pipeline.Invalid("purpose: got %q, want one of %v", f.purpose, pipeline.Purposes())
	}
	return &inspectpb.Filter{Part: f.part, Process: f.process, Lot: f.lot, Line: f.line, Station: f.station, Recipe: f.recipe,
		Purpose: purpose, From: inspectpb.FromTime(from), To: inspectpb.FromTime(to)}, nil
}

// parseTime reads a time; one without a zone is local.
func parseTime(field, text string) (time.Time, error) {
	if text == "" {
		return time.Time{}, nil
	}
	if t, err := time.Parse(time.RFC3339, text); err == nil {
		return t, nil
	}
	for _, layout := range []string{"2006-01-02", "2006-01-02T15:04", "2006-01-02T15:04:05"} {
		if t, err := time.ParseInLocation(layout, text, time.Local); err == nil {
			return t, nil
		}
	}
	return time.Time{}, pipeline.Invalid("%s: got %q, want a time such as 2026-03-01, 2026-03-01T06:15 or 2026-03-01T06:15:00+01:00", field, text)
}

// whenOf writes a time of the server as a person reads it, in local time.
func whenOf(t time.Time) string {
	if t.IsZero() {
		return "-"
	}
	return t.Local().Format("2006-01-02 15:04:05")
}

// percent writes a share.
func percent(share float64) string { return fmt.Sprintf("%.2f %%", 100*share) }
