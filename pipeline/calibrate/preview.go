package calibrate

import (
	"slices"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/files"
)

// previewTail is the share of values at each end that are drawn plain black or white.
const previewTail = 0.001

func writePreview(path string, p *raster.Plane) error {
	sorted := slices.Clone(p.Pix)
	slices.Sort(sorted)
	tail := int(previewTail * float64(len(sorted)))
	low, high := sorted[tail], sorted[len(sorted)-1-tail]
	counts := make([]uint16, len(p.Pix))
	for i, v := range p.Pix {
		if high > low {
			counts[i] = uint16(255*max(min((v-low)/(high-low), 1), 0) + 0.5)
		}
	}
	return files.Write(path, raster.Pack(raster.Mono8, counts, p.Width, p.Height))
}

func writeBadPixels(path string, c *pipeline.Calibration) error {
	counts := make([]uint16, c.Capture.Width*c.Capture.Height)
	for _, b := range c.BadPixels {
		counts[b.Y*c.Capture.Width+b.X] = 255
	}
	return files.Write(path, raster.Pack(raster.Mono8, counts, c.Capture.Width, c.Capture.Height))
}
