package server

import (
	"slices"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
	"lapgate/server/ledger"
)

// filterOf decodes a filter; no purpose means production.
func filterOf(f *inspectpb.Filter) (ledger.Filter, error) {
	out := ledger.Filter{Part: f.GetPart(), Process: f.GetProcess(), Lot: f.GetLot(), Line: f.GetLine(), Station: f.GetStation(),
		Recipe: f.GetRecipe(), Purpose: pipeline.Production}
	var err error
	if f.GetPurpose() != inspectpb.Purpose_PURPOSE_UNSPECIFIED {
		if out.Purpose, err = inspectpb.ToPurpose(f.GetPurpose()); err != nil {
			return out, err
		}
	}
	if f.GetFrom() != nil {
		if out.From, err = inspectpb.ToTime("from", f.GetFrom()); err != nil {
			return out, err
		}
	}
	if f.GetTo() != nil {
		out.To, err = inspectpb.ToTime("to", f.GetTo())
	}
	return out, err
}

func dimensionsOf(names []string) ([]ledger.Dimension, error) {
	var out []ledger.Dimension
	for _, n := range names {
		d := ledger.Dimension(n)
		if !slices.Contains(ledger.Dimensions(), d) {
			return nil, pipeline.Invalid("group_by: got %q, want any of %v", n, ledger.Dimensions())
		}
		out = append(out, d)
	}
	return out, nil
}

// picks reports whether a filter without times picks an inspection.
func picks(f ledger.Filter, in ledger.Inspection) bool {
	for _, d := range []struct{ want, have string }{
		{f.Part, in.Part}, {f.Process, in.Process}, {f.Lot, in.Lot}, {f.Line, in.Line}, {f.Station, in.Station},
		{f.Recipe, in.Judgement.Recipe}, {string(f.Purpose), string(in.Purpose)},
	} {
		if d.want != "" && d.want != d.have {
			return false
		}
	}
	return true
}
