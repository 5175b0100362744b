package stagepb

import (
	"fmt"
	"slices"

	"lapgate/pipeline"
)

// Words with which a stage names, beside planes, what it reads and writes.
const (
	ReadsRegion          = "region"
	ReadsCalibration     = "calibration"
	ReadsDefects         = "defects"
	ReadsBadPixels       = "bad pixels"
	ReadsSaturatedPixels = "saturated pixels"
	ReadsGrid            = "grid"
	ReadsCoverageMap     = "coverage map"
)

// FromItem encodes what a stage reads of an item: frames for the raw plane, the planes
// named, region, defects and masks; geometry, measurements, proofs and coverage always.
func FromItem(item *pipeline.Item, reads []string, pack Pack) (*Item, error) {
	has := func(name string) bool { return slices.Contains(reads, name) }
	out := &Item{View: item.View, Measurements: FromMeasurements(item.Measurements), Proofs: FromProofs(item.Proofs),
		Coverage: FromCoverage(item.Coverage), Truncated: item.Truncated}
	var err error
	if out.Geometry, err = FromGeometry(item.Geometry); err != nil {
		return nil, err
	}
	if has(pipeline.RawPlane) {
		for _, f := range item.Frames {
			frame, err := FromFrame(f, pack)
			if err != nil {
				return nil, err
			}
			out.Frames = append(out.Frames, frame)
		}
	}
	wanted := func(name string) bool { return name != pipeline.RawPlane && has(name) }
	if out.Planes, err = FromPlanes(item.Planes, wanted, pack); err != nil {
		return nil, err
	}
	fromMarks(out, item, has)
	for _, v := range item.Views {
		view, err := FromItem(v, []string{ReadsDefects, ReadsRegion}, pack)
		if err != nil {
			return nil, err
		}
		out.Views = append(out.Views, view)
	}
	return out, nil
}

func fromMarks(out *Item, item *pipeline.Item, has func(string) bool) {
	if has(ReadsRegion) {
		out.Region = FromRegion(item.Region)
	}
	if has(ReadsDefects) {
		out.Defects = FromDefects(item.Defects)
	}
	if has(ReadsBadPixels) {
		out.BadPixels = FromMask(item.BadMask)
	}
	if has(ReadsGrid) {
		out.Grid = FromGrid(item.Grid)
	}
	if has(ReadsCoverageMap) {
		out.CoverageMap = FromCoverageMap(item.CoverageMap)
	}
	if has(ReadsSaturatedPixels) {
		out.SaturatedPixels = FromMask(item.SaturatedAt)
	}
}

// ToItem decodes an item.
func ToItem(in *Item, fetch Fetch) (*pipeline.Item, error) {
	out := &pipeline.Item{View: in.GetView(), Geometry: ToGeometry(in.GetGeometry()), Measurements: ToMeasurements(in.GetMeasurements()),
		Proofs: ToProofs(in.GetProofs()), Coverage: ToCoverage(in.GetCoverage()), Truncated: in.GetTruncated()}
	for _, f := range in.GetFrames() {
		frame, err := ToFrame(f, fetch)
		if err != nil {
			return nil, err
		}
		frame.Header.View, frame.Header.Count = out.View, len(in.GetFrames())
		out.Frames = append(out.Frames, frame)
	}
	var err error
	if out.Planes, err = ToPlanes(in.GetPlanes(), fetch); err != nil {
		return nil, err
	}
	if err := toMarks(out, in); err != nil {
		return nil, err
	}
	for _, v := range in.GetViews() {
		view, err := ToItem(v, fetch)
		if err != nil {
			return nil, fmt.Errorf("view %q: %w", v.GetView(), err)
		}
		out.Views = append(out.Views, view)
	}
	return out, nil
}

// ToPlanes decodes planes by name; two of one name are an error. None is nil.
func ToPlanes(list []*Plane, fetch Fetch) (map[string]pipeline.NamedPlane, error) {
	var out map[string]pipeline.NamedPlane
	for _, p := range list {
		plane, err := ToPlane(p, fetch)
		if err != nil {
			return nil, err
		}
		if _, twice := out[p.GetName()]; twice {
			return nil, fmt.Errorf("plane %q: given twice", p.GetName())
		}
		if out == nil {
			out = map[string]pipeline.NamedPlane{}
		}
		out[p.GetName()] = plane
	}
	return out, nil
}

func toMarks(out *pipeline.Item, in *Item) (err error) {
	if out.Region, err = ToRegion(in.GetRegion()); err != nil {
		return err
	}
	if out.Defects, err = ToDefects(in.GetDefects()); err != nil {
		return err
	}
	if out.BadMask, err = ToMask(in.GetBadPixels()); err != nil {
		return fmt.Errorf("bad_pixels: %w", err)
	}
	if out.SaturatedAt, err = ToMask(in.GetSaturatedPixels()); err != nil {
		return fmt.Errorf("saturated_pixels: %w", err)
	}
	if out.Grid, err = ToGrid(in.GetGrid()); err != nil {
		return err
	}
	out.CoverageMap, err = ToCoverageMap(in.GetCoverageMap())
	return err
}
