package main

import (
	"fmt"
	"io"
	"slices"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

// registrationOf is how a showing lies to one before it.
type registrationOf struct {
	PreviousInspectionID string           `json:"previous_inspection_id"`
	PreviousAttempt      int32            `json:"previous_attempt"`
	Known                bool             `json:"known"` // false: every defect counts as permanent
	RotationDeg          float64          `json:"rotation_deg"`
	ShiftUUM             float64          `json:"shift_u_um"`
	ShiftVUM             float64          `json:"shift_v_um"`
	RMSUM                float64          `json:"rms_um"`
	Pairs                []pairOf         `json:"pairs"`
	Removable            []int32          `json:"removable"` // ids in the showing before: gone or moved
	Arrived              []int32          `json:"arrived"`   // ids in this one
	PermanentVerdict     pipeline.Verdict `json:"permanent_verdict"`
	PermanentReasons     []string         `json:"permanent_reasons"`
}

type pairOf struct {
	Previous   int32   `json:"previous"`
	This       int32   `json:"this"`
	DistanceUM float64 `json:"distance_um"`
}

func newRegistration(r *inspectpb.Registration) (*registrationOf, error) {
	if r == nil {
		return nil, nil
	}
	verdict, err := inspectpb.ToVerdict(r.GetPermanentVerdict())
	out := &registrationOf{PreviousInspectionID: r.GetPreviousInspectionId(), PreviousAttempt: r.GetPreviousAttempt(), Known: r.GetKnown(),
		RotationDeg: r.GetRotationDeg(), ShiftUUM: r.GetShiftUUm(), ShiftVUM: r.GetShiftVUm(), RMSUM: r.GetRmsUm(), Pairs: []pairOf{},
		Removable: orNone(r.GetRemovable()), Arrived: orNone(r.GetArrived()), PermanentVerdict: verdict, PermanentReasons: orEmpty(r.GetPermanentReasons())}
	for _, p := range r.GetPairs() {
		out.Pairs = append(out.Pairs, pairOf{p.GetPrevious(), p.GetThis(), p.GetDistanceUm()})
	}
	return out, err
}

func orNone(list []int32) []int32 {
	if list == nil {
		return []int32{}
	}
	return list
}

// tellRegistration says what stayed of the showing before.
func tellRegistration(w io.Writer, r *registrationOf) {
	if r == nil {
		return
	}
	if !r.Known {
		fmt.Fprintf(w, "  against attempt %d: how it lies to it is not known; every defect counts as permanent\n", r.PreviousAttempt)
	} else {
		fmt.Fprintf(w, "  against attempt %d: turned by %.2f°, shifted by (%.0f, %.0f) µm; %d defects stayed, %d are gone or moved%s, %d came%s\n", r.PreviousAttempt,
			r.RotationDeg, r.ShiftUUM, r.ShiftVUM, len(r.Pairs), len(r.Removable), listed(r.Removable), len(r.Arrived), listed(r.Arrived))
	}
	fmt.Fprintf(w, "  the first attempt by its permanent defects alone: %s", r.PermanentVerdict)
	for i, name := range r.PermanentReasons {
		fmt.Fprintf(w, "%s%s", map[bool]string{true: ": ", false: ", "}[i == 0], name)
	}
	fmt.Fprintln(w)
}

func listed(ids []int32) string {
	if len(ids) == 0 {
		return ""
	}
	return fmt.Sprintf(" %v", ids)
}

// markOf says whether a later showing proved a defect removable or permanent; empty = none did.
func markOf(list []inspectionOf, i inspectionOf, id int) string {
	for _, later := range list {
		r := later.Registration
		if r == nil || !r.Known || r.PreviousInspectionID != i.InspectionID {
			continue
		}
		if slices.Contains(r.Removable, int32(id)) {
			return "removable"
		}
		return "permanent"
	}
	return ""
}
