//go:build !gocv_specific_modules

package cv

// Without the tag the OpenCV binding does not compile against Debian's OpenCV; this line
// fails first and says what to do.
var _ = build_with_GOFLAGS_tags_gocv_specific_modules__see_README
