package blobs

import (
	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// Defect turns what was measured of a blob into a defect of the item, as the stage does.
func (s Settings) Defect(item *pipeline.Item, b raster.Blemish, spans []raster.Span) pipeline.Defect {
	return stage{s}.defect(item, b, spans)
}
