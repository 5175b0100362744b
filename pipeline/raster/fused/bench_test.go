package fused

import (
	"fmt"
	"runtime"
	"syscall"
	"testing"
	"time"

	"lapgate/pipeline/raster"
)

func BenchmarkFind(b *testing.B) {
	for _, format := range []raster.PixelFormat{raster.Mono8, raster.Mono12, raster.Mono12p, raster.Mono16} {
		l := look{format: format, width: 4000, height: 3000, noise: 1.6, digs: 140, scratches: 20, seed: 1}
		s := draw(l)
		c, err := NewCorrection(l.format, l.width, l.height, s.planes)
		if err != nil {
			b.Fatal(err)
		}
		whole := Whole(l.width, l.height)
		for _, low := range []float64{3.5, 2.5} {
			set := usual()
			set.Low = low
			b.Run(fmt.Sprintf("%v/low=%g", format, low), func(b *testing.B) {
				runtime.LockOSThread()
				defer runtime.UnlockOSThread()
				best, read := time.Duration(1<<62), time.Duration(1<<62)
				for range b.N {
					before := threadTime()
					if _, err := c.Find(s.raw, whole, set); err != nil {
						b.Fatal(err)
					}
					between := threadTime()
					c.Read(s.raw, set)
					best, read = min(best, between-before), min(read, threadTime()-between)
				}
				b.ReportMetric(float64(best.Microseconds())/1000, "best-cpu-ms")
				b.ReportMetric(float64(read)/float64(best), "of-read-bound")
			})
		}
	}
}

// threadTime is the CPU time of the calling thread (RUSAGE_THREAD of getrusage(2)): on a
// shared machine it says more than the clock.
func threadTime() time.Duration {
	var u syscall.Rusage
	if err := syscall.Getrusage(1, &u); err != nil {
		panic(err)
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}
