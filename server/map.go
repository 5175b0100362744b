package server

import (
	"context"
	"math"
	"slices"
	"strconv"

	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
	"lapgate/server/ledger"
)

// What a map holds.
const (
	mapUnits    = 5000
	mapPoints   = 20000
	mapLeftOut  = 100 // names
	mapFewNames = 5   // in a message
)

// GetDefectMap implements YieldService.
func (s *Yield) GetDefectMap(ctx context.Context, req *inspectpb.GetDefectMapRequest) (*inspectpb.GetDefectMapResponse, error) {
	out, err := s.defectMap(ctx, req)
	return out, inspectpb.ToStatus(err)
}

func (s *Yield) defectMap(ctx context.Context, req *inspectpb.GetDefectMapRequest) (*inspectpb.GetDefectMapResponse, error) {
	f, err := filterOf(req.Filter)
	if err != nil {
		return nil, err
	}
	if f.Part == "" {
		return nil, pipeline.Invalid("part: not given, want the part whose map is drawn")
	}
	for _, k := range req.Kinds {
		if !slices.Contains(pipeline.Kinds(), pipeline.Kind(k)) {
			return nil, pipeline.Invalid("kind: got %q, want some of %v", k, pipeline.Kinds())
		}
	}
	list, more, err := s.deps.Ledger.UnitsWithEvidence(ctx, f, mapUnits)
	if err != nil {
		return nil, err
	}
	if len(list) == 0 {
		return nil, pipeline.NotFound("map: no unit of part %s is on record for this choice", f.Part)
	}
	m := &mapMaker{coordinates: req.Coordinates, view: req.View, kinds: req.Kinds, out: &inspectpb.GetDefectMapResponse{Unit: "um", Truncated: more}}
	if err := m.chooseView(list[0]); err != nil {
		return nil, err
	}
	for _, in := range list {
		m.add(in)
	}
	if m.out.Units == 0 {
		return nil, m.nothing()
	}
	m.zones(m.newest)
	return m.out, s.frameSize(ctx, m)
}

// frameSize adds the size of the frame that camera coordinates speak of.
func (s *Yield) frameSize(ctx context.Context, m *mapMaker) error {
	if m.coordinates != inspectpb.Coordinates_COORDINATES_CAMERA {
		return nil
	}
	in, err := s.deps.Ledger.Inspection(ctx, m.newest.ID)
	if err != nil {
		return err
	}
	for _, v := range in.Evidence.Views {
		if v.Name == m.view && len(v.Frames) > 0 {
			m.out.WidthPx, m.out.HeightPx = int32(v.Frames[0].Header.Width), int32(v.Frames[0].Header.Height)
		}
	}
	return nil
}

// mapMaker puts units onto a map.
type mapMaker struct {
	coordinates inspectpb.Coordinates
	view        string
	kinds       []string
	newest      ledger.Inspection // of those on the map
	out         *inspectpb.GetDefectMapResponse
}

// chooseView refuses what cannot be drawn; a camera's map is of one view.
func (m *mapMaker) chooseView(in ledger.Inspection) error {
	var names []string
	for _, v := range in.Evidence.Views {
		names = append(names, v.Name)
	}
	switch {
	case m.coordinates == inspectpb.Coordinates_COORDINATES_UNSPECIFIED:
		return pipeline.Invalid("coordinates: not given, want part, station or camera")
	case m.view != "" && len(names) > 0 && !slices.Contains(names, m.view):
		return pipeline.Invalid("view: got %q, want one of %v", m.view, names)
	case m.coordinates == inspectpb.Coordinates_COORDINATES_CAMERA:
		m.out.Unit = "px"
		if m.view == "" && len(names) != 1 {
			return pipeline.Invalid("view: not given, want one of %v: each view has a camera's frame of its own", names)
		}
		if m.view == "" {
			m.view = names[0]
		}
	}
	return nil
}

// add puts a unit's defects onto the map. In part coordinates a unit whose angle is not
// known is left out, also when nothing was found on it.
func (m *mapMaker) add(in ledger.Inspection) {
	defects, ok := m.defectsOf(in.Evidence)
	if !ok {
		return
	}
	turn, known := partAngle(in.Evidence)
	if m.coordinates == inspectpb.Coordinates_COORDINATES_PART && !known {
		m.out.UnitsLeftOut++
		if len(m.out.LeftOut) < mapLeftOut {
			m.out.LeftOut = append(m.out.LeftOut, in.Unit)
		}
		return
	}
	if m.out.Units == 0 {
		m.newest = in
	}
	m.out.Units++
	for _, d := range defects {
		if len(m.kinds) > 0 && !slices.Contains(m.kinds, string(d.Kind)) {
			continue
		}
		if len(m.out.Points) == mapPoints {
			m.out.Truncated = true
			return
		}
		x, y := m.where(d, turn)
		m.out.Points = append(m.out.Points, &inspectpb.MapPoint{InspectionId: strconv.FormatInt(in.ID, 10), Unit: in.Unit, Kind: string(d.Kind), Zone: d.Zone,
			X: x, Y: y, SizeUm: size(d), Verdict: inspectpb.FromVerdict(in.Judgement.Verdict)})
	}
}

// defectsOf returns the merged defects, or those of the view; ok is false where the unit
// has no such view.
func (m *mapMaker) defectsOf(e pipeline.Evidence) ([]pipeline.Defect, bool) {
	if m.view == "" {
		return e.Defects, true
	}
	for _, v := range e.Views {
		if v.Name == m.view {
			return v.Defects, true
		}
	}
	return nil, false
}

func (m *mapMaker) where(d pipeline.Defect, turnDeg float64) (x, y float64) {
	switch m.coordinates {
	case inspectpb.Coordinates_COORDINATES_CAMERA:
		return d.XPx, d.YPx
	case inspectpb.Coordinates_COORDINATES_PART:
		sin, cos := math.Sincos(turnDeg * math.Pi / 180)
		return cos*d.UUM + sin*d.VUM, cos*d.VUM - sin*d.UUM
	}
	return d.UUM, d.VUM
}

// partAngle is by how much a part lay turned, where a datum told.
func partAngle(e pipeline.Evidence) (deg float64, known bool) {
	for _, one := range e.Measurements {
		if one.Name == pipeline.MeasuredPartAngle {
			return one.Value, true
		}
	}
	return 0, false
}

func size(d pipeline.Defect) float64 {
	if d.Kind == pipeline.Scratch || d.Kind == pipeline.Fibre {
		return d.LengthUM
	}
	return d.DiameterUM
}

// nothing says why no unit is on the map.
func (m *mapMaker) nothing() error {
	if m.out.UnitsLeftOut > 0 {
		return pipeline.NotFound("map: the angle of all %d units is unknown (such as %v), so where their defects lie on the part is not known: "+
			"add the stage datum with a mark of the part to the recipe, or ask for coordinates station", m.out.UnitsLeftOut, m.out.LeftOut[:min(len(m.out.LeftOut), mapFewNames)])
	}
	return pipeline.NotFound("map: no unit has the view %q", m.view)
}

// zones adds the zones that are circles, as the newest unit's views have them, each once.
func (m *mapMaker) zones(in ledger.Inspection) {
	seen := map[pipeline.ZoneEvidence]bool{}
	for _, v := range in.Evidence.Views {
		if m.view != "" && v.Name != m.view {
			continue
		}
		for _, z := range v.Region.Zones {
			if z.OuterDiameterMM == 0 || seen[z] {
				continue
			}
			seen[z] = true
			one := &inspectpb.MapZone{Name: z.Name, OuterDiameter: 1000 * z.OuterDiameterMM, InnerDiameter: 1000 * z.InnerDiameterMM}
			if m.coordinates == inspectpb.Coordinates_COORDINATES_CAMERA && v.UMPerPx > 0 {
				one.CentreX, one.CentreY = v.Region.CentreX, v.Region.CentreY
				one.OuterDiameter /= v.UMPerPx
				one.InnerDiameter /= v.UMPerPx
			}
			m.out.Zones = append(m.out.Zones, one)
		}
	}
}
