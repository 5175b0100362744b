package main

import (
	"errors"
	"fmt"
	"maps"
	"os"
	"runtime"

	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/cv"
	"lapgate/pipeline/raster/lines"
)

// bankThreshold is the sigmas at which the filter bank marks a pixel.
const bankThreshold = 5.5

// benchLines measures the line search against a bank of line filters in OpenCV, in turns,
// the best of each by CPU time on one thread; then how often it finds a faint scratch, and
// how often one that is not there.
func benchLines(o options) (map[string]figure, error) {
	runtime.LockOSThread()
	defer runtime.UnlockOSThread()
	out, err := lineSpeed(o)
	if err != nil {
		return nil, err
	}
	for _, study := range []func(options) (map[string]figure, error){scratchDetection, lineFalseAlarms} {
		figures, err := study(o)
		if err != nil {
			return nil, err
		}
		maps.Copy(out, figures)
	}
	return out, nil
}

// lineSpeed times searches of one plane of white noise with 20 scratches.
func lineSpeed(o options) (map[string]figure, error) {
	p := whiteNoise(raster.NewPlane(sceneWidth, sceneHeight), 1)
	random := studyRandom(2)
	for range 20 {
		drawScratch(p, randomScratch(random, sceneWidth, sceneHeight, 300), 1, 1)
	}
	bank, err := cv.NewLineBank(sceneWidth, sceneHeight, 16, 31)
	if err != nil {
		return nil, err
	}
	defer bank.Close()
	cv.SetThreads(1)
	search := func(half bool) func() error {
		var finder lines.Finder // keeps the memory for pictures of one size
		s := lines.Default
		s.Half = half
		return func() error {
			r, err := finder.Find(p, lines.Whole(sceneWidth, sceneHeight), nil, s)
			if err == nil && len(r.Lines) < 15 {
				err = fmt.Errorf("%d lines found, want the 20 that were drawn", len(r.Lines))
			}
			return err
		}
	}
	inFull, inHalf := search(false), search(true)
	full, half, filters := &pair{}, &pair{}, &pair{}
	for i := range max(repeats(o, 12), 10) {
		if err := errors.Join(full.time(inFull), half.time(inHalf)); err != nil {
			return nil, err
		}
		if i == 0 || i%4 == 0 && !o.short { // it takes seconds
			fmt.Fprintf(os.Stderr, "bench: filter bank, run %d\n", i/4+1)
			if err := filters.time(func() error { _, err := bank.Run(p, bankThreshold); return err }); err != nil {
				return nil, err
			}
		}
	}
	return map[string]figure{
		"line_search_cpu_ms_12mp": {milliseconds(full.cpu), "ms"}, "line_search_half_cpu_ms_12mp": {milliseconds(half.cpu), "ms"},
		"line_filter_bank_cpu_ms_12mp": {milliseconds(filters.cpu), "ms"},
		"line_search_vs_filter_bank":   {float64(filters.cpu) / float64(full.cpu), ""},
		"line_half_over_full":          {float64(half.cpu) / float64(full.cpu), ""},
	}, nil
}
