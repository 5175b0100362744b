package stagetest

import (
	"math"
	"math/rand/v2"

	"lapgate/pipeline/raster"
)

// Scene returns a small Mono8 frame: a bright disc on dark ground, with noise, three
// spots and a scratch on the disc. It is the same every time.
func Scene() raster.Raw {
	const width, height = 200, 180
	random := rand.New(rand.NewPCG(2, 3))
	counts := make([]uint16, width*height)
	for i := range counts {
		x, y := float64(i%width), float64(i/width)
		v := 6 + 14*math.Erfc((math.Hypot(x-99.3, y-90.2)-80)/1.4)/2 + 1.2*random.NormFloat64()
		for _, s := range [][4]float64{{80, 70, 1.5, 60}, {120.4, 101.7, 2.5, 90}, {100, 130.5, 1, 300}} {
			v += s[3] * math.Exp(-(math.Pow(x-s[0], 2)+math.Pow(y-s[1], 2))/(2*s[2]*s[2]))
		}
		if along := (x - 70) + (y - 100); math.Abs(along) < 40 {
			v += 40 * math.Exp(-math.Pow((x-70)-(y-100), 2)/4)
		}
		counts[i] = uint16(min(max(math.Round(v), 0), 255))
	}
	return raster.Pack(raster.Mono8, counts, width, height)
}

// OddFrames returns frames that a stage must survive, by name.
func OddFrames() map[string]raster.Raw {
	frames := map[string]raster.Raw{}
	for name, c := range map[string]struct {
		width, height int
		format        raster.PixelFormat
		level         func(i, top int) int
	}{
		"1 x 1":         {1, 1, raster.Mono8, half},
		"3 x 3":         {3, 3, raster.Mono12, half},
		"one row":       {100, 1, raster.Mono8, half},
		"one column":    {1, 100, raster.Mono8, half},
		"all zero":      {150, 130, raster.Mono8, func(_, _ int) int { return 0 }},
		"all max":       {150, 130, raster.Mono12p, func(_, top int) int { return top }},
		"chequered":     {150, 130, raster.Mono8, func(i, top int) int { return i % 2 * top }},
		"one hot pixel": {150, 130, raster.Mono8, hot},
	} {
		counts := make([]uint16, c.width*c.height)
		for i := range counts {
			counts[i] = uint16(c.level(i, c.format.MaxCount()))
		}
		frames[name] = raster.Pack(c.format, counts, c.width, c.height)
	}
	return frames
}

func half(_, top int) int { return top / 2 }

func hot(i, top int) int {
	if i == 60*150+75 {
		return top
	}
	return 10
}
