// Package builtin is the list of stages and fusers that are compiled into the programs.
// It holds none of them itself.
package builtin

import (
	"lapgate/pipeline"
	"lapgate/plugins/areas"
	"lapgate/plugins/blobs"
	"lapgate/plugins/classify"
	"lapgate/plugins/coverage"
	"lapgate/plugins/darkfield"
	"lapgate/plugins/datum"
	"lapgate/plugins/detect"
	"lapgate/plugins/edge"
	"lapgate/plugins/flatfield"
	"lapgate/plugins/logarithm"
	"lapgate/plugins/merge"
	"lapgate/plugins/proof"
	"lapgate/plugins/region"
	"lapgate/plugins/scratches"
)

// Stages returns the factories of all stages.
func Stages() []pipeline.Factory {
	return []pipeline.Factory{
		proof.Factory,
		region.Factory,
		flatfield.Factory,
		darkfield.Factory,
		blobs.Factory,
		scratches.Factory,
		areas.Factory,
		coverage.Factory,
		edge.Factory,
		logarithm.Factory,
		merge.Factory(),
		datum.Factory,
		classify.Factory(),
		classify.ViewFactory(),
	}
}

// Fusers returns the fusers of all rows of stages that one pass can replace.
func Fusers() []pipeline.Fuser { return []pipeline.Fuser{detect.Fuser()} }

// Catalogue returns the catalogue of all stages and those given beside them. It cannot
// fail unless two have one type.
func Catalogue(more ...pipeline.Factory) (*pipeline.Catalogue, error) {
	return pipeline.NewCatalogue(append(Stages(), more...), Fusers())
}
