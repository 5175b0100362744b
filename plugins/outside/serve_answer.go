package outside

import (
	"fmt"
	"maps"
	"reflect"
	"slices"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/proto/stagepb"
)

// answer returns what a stage made of an item: the difference between was and is.
func answer(was, is *pipeline.Item, pack stagepb.Pack) (*stagepb.RunResponse, error) {
	out := &stagepb.RunResponse{Truncated: is.Truncated}
	err := firstError(
		func() error { return answerLists(out, was, is) },
		func() error { return answerPlace(out, was, is) },
		func() error { return answerMasks(out, was, is) },
		func() (err error) { out.Planes, err = madePlanes(was, is, pack); return err },
	)
	if err != nil {
		return nil, status.Error(codes.FailedPrecondition, err.Error())
	}
	return out, nil
}

func firstError(steps ...func() error) error {
	for _, step := range steps {
		if err := step(); err != nil {
			return err
		}
	}
	return nil
}

func answerLists(out *stagepb.RunResponse, was, is *pipeline.Item) error {
	measurements, ok := added(was.Measurements, is.Measurements)
	if !ok {
		return fmt.Errorf("the stage took away or changed measurements of others; a stage outside may only add")
	}
	proofs, ok := added(was.Proofs, is.Proofs)
	if !ok {
		return fmt.Errorf("the stage took away or changed proofs of others; a stage outside may only add")
	}
	out.Measurements, out.Proofs = stagepb.FromMeasurements(measurements), stagepb.FromProofs(proofs)
	defects, ok := added(was.Defects, is.Defects)
	if !ok {
		defects = is.Defects
	}
	out.Defects, out.ReplaceDefects = stagepb.FromDefects(defects), !ok
	return nil
}

// added returns what stands in is after was, and whether was is its beginning.
func added[T any](was, is []T) ([]T, bool) {
	if len(is) < len(was) || !reflect.DeepEqual(slices.Clone(is[:len(was)]), slices.Clone(was)) && len(was) > 0 {
		return nil, false
	}
	return is[len(was):], true
}

func answerPlace(out *stagepb.RunResponse, was, is *pipeline.Item) (err error) {
	if is.Region != was.Region {
		out.Region = stagepb.FromRegion(is.Region)
	}
	if !reflect.DeepEqual(is.Geometry, was.Geometry) {
		if out.Geometry, err = stagepb.FromGeometry(is.Geometry); err != nil {
			return err
		}
	}
	if is.Coverage != was.Coverage {
		out.Coverage = stagepb.FromCoverage(is.Coverage)
	}
	if is.CoverageMap != was.CoverageMap {
		out.CoverageMap = stagepb.FromCoverageMap(is.CoverageMap)
	}
	if is.Grid != was.Grid {
		out.Grid = stagepb.FromGrid(is.Grid)
	}
	return nil
}

func answerMasks(out *stagepb.RunResponse, was, is *pipeline.Item) error {
	for _, m := range []struct {
		name    string
		was, is *raster.Mask
		to      **stagepb.Mask
	}{{"bad pixels", was.BadMask, is.BadMask, &out.BadPixels}, {"saturated pixels", was.SaturatedAt, is.SaturatedAt, &out.SaturatedPixels}} {
		if m.is == nil && m.was != nil {
			return fmt.Errorf("the stage took away the %s of others; a stage outside may only add", m.name)
		}
		if m.is != m.was {
			*m.to = stagepb.FromMask(m.is)
		}
	}
	return nil
}

// madePlanes packs the planes that are new or others than before; the raw one is the host's.
func madePlanes(was, is *pipeline.Item, pack stagepb.Pack) ([]*stagepb.Plane, error) {
	made := map[string]pipeline.NamedPlane{}
	for _, name := range slices.Sorted(maps.Keys(is.Planes)) {
		if name != pipeline.RawPlane && is.Planes[name] != was.Planes[name] {
			made[name] = is.Planes[name]
		}
	}
	return stagepb.FromPlanes(made, func(string) bool { return true }, pack)
}
