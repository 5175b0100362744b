package builtin

import (
	"math"
	"math/rand/v2"
	"syscall"
	"testing"
	"time"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
	"lapgate/plugins/region"
)

// BenchmarkDetection runs the reference chain on one frame of 1600 × 1200 px with 20 digs.
func BenchmarkDetection(b *testing.B) {
	raw := benchFrame()
	calibrated := view(raw)
	env := pipeline.Environment{View: "ring", Calibration: calibrated.Calibration, Geometry: calibrated.Geometry}
	var names []string
	var stages []pipeline.Stage
	for _, f := range Stages()[:4] {
		s, _, err := f.New(decodeFor(f.Type), env)
		if err != nil {
			b.Fatal(err)
		}
		names, stages = append(names, f.Type), append(stages, s)
	}
	calibration := calibrated.Calibration
	view := func(raw raster.Raw) *pipeline.Item {
		return &pipeline.Item{View: "ring", Frames: []pipeline.Frame{{Raw: raw}}, Calibration: calibration, Geometry: env.Geometry}
	}
	run := func(b *testing.B, n int) {
		for b.Loop() {
			b.StopTimer()
			item := view(raw)
			for _, s := range stages[:n] {
				if err := s.Run(b.Context(), item); err != nil {
					b.Fatal(err)
				}
			}
			b.StartTimer()
			if err := stages[n].Run(b.Context(), item); err != nil {
				b.Fatal(err)
			}
		}
	}
	b.Run("chain", func(b *testing.B) {
		start, runs := cpuTime(b), 0
		for b.Loop() {
			item := view(raw)
			for _, s := range stages {
				if err := s.Run(b.Context(), item); err != nil {
					b.Fatal(err)
				}
			}
			runs++
		}
		b.ReportMetric(1000*(cpuTime(b)-start).Seconds()/float64(runs), "cpu-ms/op")
	})
	for i, name := range names {
		b.Run(name, func(b *testing.B) { run(b, i) })
	}
}

// cpuTime returns what the process has used so far; on a machine that others use too it
// says more than the wall clock.
func cpuTime(b *testing.B) time.Duration {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		b.Fatal(err)
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}

func decodeFor(typ string) pipeline.Decode {
	if typ != "region" {
		return nil
	}
	return func(dst any) error {
		s := dst.(*region.Settings)
		s.Shape, s.DiameterMM, s.DiameterToleranceMM, s.RimMM = region.FoundCircle, 10.8, 0.1, 0.3
		return nil
	}
}

func benchFrame() raster.Raw {
	const width, height = 1600, 1200
	random := rand.New(rand.NewPCG(1, 1))
	counts := make([]uint16, width*height)
	spots := make([][3]float64, 20)
	for i := range spots {
		spots[i] = [3]float64{500 + 600*random.Float64(), 300 + 600*random.Float64(), 1 + 4*random.Float64()}
	}
	for i := range counts {
		x, y := float64(i%width), float64(i/width)
		v := 6 + 14*math.Erfc((math.Hypot(x-799.5, y-599.5)-540)/1.4)/2 + 1.5*random.NormFloat64()
		for _, s := range spots {
			if dx, dy := x-s[0], y-s[1]; math.Abs(dx) < 25 && math.Abs(dy) < 25 {
				v += 80 * math.Exp(-(dx*dx+dy*dy)/(2*s[2]*s[2]))
			}
		}
		counts[i] = uint16(min(max(math.Round(v), 0), 255))
	}
	return raster.Pack(raster.Mono8, counts, width, height)
}
