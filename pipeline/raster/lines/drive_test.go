package lines

import (
	"testing"

	"lapgate/pipeline/raster/drive"
)

// The kernels under AddressSanitizer and UndefinedBehaviorSanitizer, over random sizes,
// holes, values that are no numbers, lines and settings.
func TestSanitized(t *testing.T) { drive.Sanitized(t, "15") }

func TestSameBitsOnEveryLevel(t *testing.T) { drive.SameBitsOnEveryLevel(t) }

func TestSameBitsOnArm64(t *testing.T) { drive.Arm64(t, "10") }
