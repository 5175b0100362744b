package main

import (
	"fmt"
	"math"
	"os"

	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/lines"
	"lapgate/server/yield"
)

// Tiles of the study of detection: a scratch lies in them as in a large frame, but nearer
// to the border, where fewer strips hold it. That is the harder case.
const tileSide, scratchLength = 640, 300

// scratchDetection counts how many scratches 1 px wide and 300 px long are found, by their
// height in sigmas of a pixel: in white noise, and at one sigma where lay is a part of it.
// The noise is another one for each scratch.
func scratchDetection(o options) (map[string]figure, error) {
	out := map[string]figure{}
	for _, c := range []struct {
		name   string
		snr    float64
		trials int
		ground ground
	}{{"pd_snr_1_00", 1, 1000, plainGround}, {"pd_snr_0_75", 0.75, 1000, plainGround}, {"pd_snr_0_50", 0.5, 1000, plainGround},
		{"straight_lay_pd_snr_1_00", 1, 300, straightLay}, {"concentric_lay_pd_snr_1_00", 1, 300, concentricLay}} {
		if o.short {
			c.trials /= 10
		}
		found := map[bool]int{}
		var finder lines.Finder
		for i := range c.trials {
			if i%250 == 0 {
				fmt.Fprintf(os.Stderr, "bench: scratch_%s, %d of %d\n", c.name, i, c.trials)
			}
			p := raster.NewPlane(tileSide, tileSide)
			centre := c.ground.draw(p, uint64(2e6+i))
			s := randomScratch(studyRandom(uint64(1e6+i)), tileSide, tileSide, scratchLength)
			drawScratch(p, s, 1, c.snr)
			for _, half := range []bool{false, true} {
				ok, err := finds(&finder, p, s, half, centre)
				if err != nil {
					return nil, err
				}
				if ok {
					found[half]++
				}
			}
		}
		for half, name := range map[bool]string{false: "scratch_" + c.name, true: "scratch_half_" + c.name} {
			if err := share(out, name, found[half], c.trials); err != nil {
				return nil, err
			}
		}
	}
	return out, nil
}

// ground is what a scratch lies on.
type ground int

const (
	plainGround ground = iota // white noise
	straightLay
	concentricLay
)

// draw fills a plane of unit noise. Lay is of half to twice the noise, with a period of 5 to
// 20 px; the centre of a concentric one is returned as well as a region finds it.
func (g ground) draw(p *raster.Plane, seed uint64) (centre *raster.Point) {
	whiteNoise(p, seed)
	if g == plainGround {
		return nil
	}
	random := studyRandom(seed + 1e7)
	rms := 0.5 * math.Pow(4, random.Float64())
	l := newLay(random, p.Width, p.Height, g == concentricLay, rms, 5*math.Pow(4, random.Float64()))
	l.addTo(p, rms)
	return &raster.Point{X: l.cx + random.NormFloat64(), Y: l.cy + random.NormFloat64()}
}

// share sets a share with its exact 95 % interval (Clopper and Pearson).
func share(out map[string]figure, name string, count, trials int) error {
	i, err := yield.ClopperPearson(count, trials, 0.95)
	if err != nil {
		return err
	}
	out[name], out[name+"_low"], out[name+"_high"] = figure{float64(count) / float64(trials), ""}, figure{i.Low, ""}, figure{i.High, ""}
	return nil
}

func finds(f *lines.Finder, p *raster.Plane, s scratch, half bool, centre *raster.Point) (bool, error) {
	settings := lines.Default
	settings.Half, settings.Centre = half, centre
	r, err := f.Find(p, lines.Whole(p.Width, p.Height), nil, settings)
	if err != nil {
		return false, err
	}
	for _, l := range r.Lines {
		if s.foundAs(l) {
			return true, nil
		}
	}
	return false, nil
}

// foundAs reports whether a line lies on the scratch, all of it within 4 px, and over at
// least half of its length.
func (s scratch) foundAs(l lines.Line) bool {
	length := math.Hypot(s.x1-s.x0, s.y1-s.y0)
	dx, dy := (s.x1-s.x0)/length, (s.y1-s.y0)/length
	low, high := math.Inf(1), math.Inf(-1)
	for _, p := range l.Path {
		u, v := p.X-s.x0, p.Y-s.y0
		if math.Abs(v*dx-u*dy) > 4 {
			return false
		}
		low, high = min(low, u*dx+v*dy), max(high, u*dx+v*dy)
	}
	return min(high, length)-max(low, 0) >= length/2
}

// lineFalseAlarms counts lines in frames of 12 megapixels without any. Thresholds are the
// defaults; they were set on other noise.
func lineFalseAlarms(o options) (map[string]figure, error) {
	out := map[string]figure{}
	for _, kind := range []struct {
		name   string
		frames int
		ground ground
	}{{"line_false_alarms_per_12mp_frame", 300, plainGround}, {"line_false_alarms_per_12mp_straight_lay_frame", 60, straightLay},
		{"line_false_alarms_per_12mp_concentric_lay_frame", 60, concentricLay}} {
		if o.short {
			kind.frames /= 30
		}
		count := map[bool]int{}
		var finder lines.Finder
		p := raster.NewPlane(sceneWidth, sceneHeight)
		for i := range kind.frames {
			if i%25 == 0 {
				fmt.Fprintf(os.Stderr, "bench: %s, frame %d of %d\n", kind.name, i, kind.frames)
			}
			centre := kind.ground.draw(p, uint64(3e6+i))
			for _, half := range []bool{false, true} {
				settings := lines.Default
				settings.Half, settings.Centre = half, centre
				r, err := finder.Find(p, lines.Whole(sceneWidth, sceneHeight), nil, settings)
				if err != nil {
					return nil, err
				}
				count[half] += len(r.Lines)
			}
		}
		for half, name := range map[bool]string{false: kind.name, true: "half_" + kind.name} {
			if err := perFrame(out, name, count[half], kind.frames); err != nil {
				return nil, err
			}
		}
	}
	return out, nil
}

// perFrame sets a rate with its exact 95 % interval (Garwood).
func perFrame(out map[string]figure, name string, count, frames int) error {
	i, err := yield.Poisson(count, 0.95)
	if err != nil {
		return err
	}
	n := float64(frames)
	out[name], out[name+"_low"], out[name+"_high"] = figure{float64(count) / n, ""}, figure{i.Low / n, ""}, figure{i.High / n, ""}
	return nil
}
