package outside

import (
	"slices"

	"lapgate/pipeline"
)

// apply lays what a stage made over the item. A hold of a view is a proof that failed,
// so that the stages after it still run; a unit has no proofs, there it is the failure.
func (m *made) apply(item *pipeline.Item, stage string) error {
	if m.region != nil {
		item.Region = m.region
	}
	if m.geometry != nil {
		item.Geometry = m.geometry
	}
	for name, p := range m.planes {
		item.SetPlane(name, p.Unit, p.Pixels)
		item.Planes[name] = p
	}
	if m.bad != nil {
		item.BadMask = m.bad
	}
	if m.hot != nil {
		item.SaturatedAt = m.hot
	}
	if m.coverage != nil {
		item.Coverage = *m.coverage
	}
	if m.coverageMap != nil {
		item.CoverageMap = m.coverageMap
	}
	if m.grid != nil {
		item.Grid = m.grid
	}
	item.Truncated = item.Truncated || m.truncated
	item.Measurements = append(slices.Clip(item.Measurements), m.measurements...)
	item.Proofs = append(slices.Clip(item.Proofs), m.proofs...)
	switch {
	case m.replace:
		item.Defects = m.defects
	case len(m.defects) > 0:
		item.Defects = append(slices.Clip(item.Defects), m.defects...)
	}
	if m.hold == "" {
		return nil
	}
	if len(item.Views) > 0 {
		return pipeline.Fail(pipeline.Unready, "it holds the unit: %s", m.hold)
	}
	item.Prove(pipeline.Proof{Name: stage, Reason: m.hold})
	return nil
}
