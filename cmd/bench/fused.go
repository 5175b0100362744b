package main

import (
	"fmt"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strconv"
	"strings"
	"sync"
	"syscall"
	"time"

	"lapgate/pipeline/raster"
	"lapgate/pipeline/raster/cv"
	"lapgate/pipeline/raster/fused"
)

// pair is the shortest of several runs by the clock and by the thread's CPU time: the
// second says more where others use the machine, but nothing of work on other threads.
type pair struct{ clock, cpu time.Duration }

func (p *pair) time(f func() error) error {
	start, before := time.Now(), threadTime()
	if err := f(); err != nil {
		return err
	}
	clock, cpu := time.Since(start), threadTime()-before
	if p.clock == 0 || clock < p.clock {
		p.clock = clock
	}
	if p.cpu == 0 || cpu < p.cpu {
		p.cpu = cpu
	}
	return nil
}

// threadTime is the CPU time of the calling thread (RUSAGE_THREAD of getrusage(2)).
func threadTime() time.Duration { return cpuTime(1) }

// processTime is the CPU time of all threads.
func processTime() time.Duration { return cpuTime(syscall.RUSAGE_SELF) }

func cpuTime(who int) time.Duration {
	var u syscall.Rusage
	if syscall.Getrusage(who, &u) != nil {
		return 0
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}

// fusedScene is what the fused pass is measured on.
type fusedScene struct {
	raw        raster.Raw
	correction *fused.Correction
}

func prepare(raw raster.Raw, planes fused.Planes) (fusedScene, error) {
	c, err := fused.NewCorrection(raw.Format, raw.Width, raw.Height, planes)
	return fusedScene{raw, c}, err
}

// inMono12 is the scene in counts of 12 bits: the same light, noise and patterns.
func inMono12(s scene, planes fused.Planes) (fusedScene, error) {
	counts := make([]uint16, len(s.raw.Data))
	for i, v := range s.raw.Data {
		counts[i] = min(uint16(v)*16+uint16(i*2654435761>>7&15), 4095) // the low bits are noise
	}
	dark := planes.Dark.Clone()
	for i := range dark.Pix {
		dark.Pix[i] *= 16
	}
	planes.Dark = dark
	return prepare(raster.Pack(raster.Mono12, counts, s.raw.Width, s.raw.Height), planes)
}

func (f fusedScene) find(low float64, bands int) (*fused.Result, error) {
	s := fused.Settings{Low: low, High: 6, Polarity: fused.Bright, MinAreaPx: 1, Grid: raster.DefaultGrid(), Bands: bands}
	return f.correction.Find(f.raw, fused.Whole(f.raw.Width, f.raw.Height), s)
}

func (f fusedScene) run(low float64, bands int) func() error {
	return func() error {
		r, err := f.find(low, bands)
		if err == nil && (len(r.Blobs) < 100 || r.Floats) {
			err = fmt.Errorf("%d blobs, floats %v; want the scene's 160 by integers", len(r.Blobs), r.Floats)
		}
		return err
	}
}

// sideBySide runs f on n goroutines at once.
func sideBySide(n int, f func() error) func() error {
	return func() error {
		errs := make([]error, n)
		var wait sync.WaitGroup
		for i := range n {
			wait.Go(func() { errs[i] = f() })
		}
		wait.Wait()
		for _, err := range errs {
			if err != nil {
				return err
			}
		}
		return nil
	}
}

// benchFused measures the fused pass against the tuned OpenCV chain, against merely
// reading its input, against itself on two threads and other frames: all in turns, the
// best of at least ten of each. Ratios on one thread are of CPU time, those with two
// threads of the clock.
func benchFused(o options) (map[string]figure, error) {
	runtime.LockOSThread()
	defer runtime.UnlockOSThread()
	s := *o.scene()
	planes := fused.Planes{Dark: s.dark, Response: s.calibration().Response, Bad: s.bad}
	eight, err := prepare(s.raw, planes)
	if err != nil {
		return nil, err
	}
	twelve, err := inMono12(s, planes)
	if err != nil {
		return nil, err
	}
	chain, err := cv.NewTunedChain(s.dark, s.gain, s.bad, 3.5, 6)
	if err != nil {
		return nil, err
	}
	defer chain.Close()
	opencv := func(threads int) func() error {
		return func() error {
			cv.SetThreads(threads)
			_, err := chain.Run(s.raw)
			return err
		}
	}
	settings := fused.Settings{Low: 3.5, High: 6, Grid: raster.DefaultGrid()}
	jobs := map[string]func() error{
		"fused": eight.run(3.5, 1), "low": eight.run(2.5, 1), "mono12": twelve.run(3.5, 1), "bands": eight.run(3.5, 2),
		"two in turn": inTurn(2, eight.run(3.5, 1)),
		"two at once": sideBySide(2, eight.run(3.5, 1)),
		"read":        func() error { eight.correction.Read(s.raw, settings); return nil },
		"opencv 1":    opencv(1), "opencv 2": opencv(2),
	}
	times := map[string]*pair{}
	for range o.rounds(30) {
		for name, job := range jobs {
			if times[name] == nil {
				times[name] = &pair{}
			}
			time.Sleep(10 * time.Millisecond) // OpenCV's threads go on spinning for a while
			if err := times[name].time(job); err != nil {
				return nil, fmt.Errorf("%s: %w", name, err)
			}
		}
	}
	out := fusedFigures(times)
	out["heap_per_frame_fraction"] = figure{heapFraction(eight), ""}
	if o.short { // compiling takes longer than all the rest
		return out, nil
	}
	if ratio, err := portableOverNative(o); err != nil {
		fmt.Fprintf(os.Stderr, "bench: portable_vs_native left out: %v\n", err)
	} else {
		out["portable_vs_native"] = figure{ratio, ""}
	}
	return out, nil
}

// inTurn runs f n times, one after the other.
func inTurn(n int, f func() error) func() error {
	return func() error {
		for range n {
			if err := f(); err != nil {
				return err
			}
		}
		return nil
	}
}

func fusedFigures(t map[string]*pair) map[string]figure {
	cpu := func(a, b string) figure { return figure{float64(t[a].cpu) / float64(t[b].cpu), ""} }
	clock := func(a, b string) figure { return figure{float64(t[a].clock) / float64(t[b].clock), ""} }
	ms := func(d time.Duration) figure { return figure{float64(d.Microseconds()) / 1000, "ms"} }
	return map[string]figure{
		"fused_ms_12mp": ms(t["fused"].clock), "fused_cpu_ms_12mp": ms(t["fused"].cpu), "read_bound_cpu_ms_12mp": ms(t["read"].cpu),
		"opencv_tuned_1t_cpu_ms_12mp": ms(t["opencv 1"].cpu), "opencv_tuned_2t_ms_12mp": ms(t["opencv 2"].clock),
		"fused_vs_opencv_tuned_1t": cpu("opencv 1", "fused"), "fused_vs_opencv_tuned_2t": clock("opencv 2", "fused"),
		"fused_share_of_read_bound": cpu("read", "fused"), "mono12_over_mono8": cpu("mono12", "fused"),
		"lowthreshold_time_ratio": cpu("low", "fused"), "two_frames_parallel_speedup": clock("two in turn", "two at once"),
		"one_frame_bands_speedup": clock("fused", "bands"),
	}
}

// heapFraction is the memory that a frame in flight takes beside its own pixels and the
// correction, as a share of its pixels: C memory, and what Go allocates in one call.
func heapFraction(f fusedScene) float64 {
	var before, after runtime.MemStats
	s := fused.Settings{Low: 3.5, High: 6, Polarity: fused.Bright, MinAreaPx: 1, Grid: raster.DefaultGrid()}
	whole := fused.Whole(f.raw.Width, f.raw.Height)
	runtime.ReadMemStats(&before)
	r, err := f.correction.Find(f.raw, whole, s)
	runtime.ReadMemStats(&after)
	if err != nil {
		return math.NaN()
	}
	return float64(r.MemoryBytes+int64(after.TotalAlloc-before.TotalAlloc)) / float64(len(f.raw.Data))
}

// kernels is where the C sources lie from the module's root.
const kernels = "pipeline/raster/fused"

// portableOverNative builds the kernels once with their clones and once for this machine
// alone, and compares the CPU times of a frame.
func portableOverNative(o options) (float64, error) {
	sources, err := filepath.Glob(kernels + "/*.c")
	if err != nil || len(sources) == 0 {
		return 0, fmt.Errorf("no sources in %s: run it in the module's root", kernels)
	}
	dir, err := os.MkdirTemp("", "bench")
	if err != nil {
		return 0, err
	}
	defer os.RemoveAll(dir)
	best := map[string]float64{"portable": math.Inf(1), "native": math.Inf(1)}
	for name, flags := range map[string][]string{"portable": nil, "native": {"-march=native", "-DPG_NO_CLONES"}} {
		args := append([]string{"-O3", "-std=gnu11", "-ffp-contract=off", "-o", filepath.Join(dir, name), kernels + "/testdata/drive.c"}, sources...)
		if out, err := exec.Command("gcc", append(append(args, flags...), "-lm")...).CombinedOutput(); err != nil {
			return 0, fmt.Errorf("gcc: %v: %s", err, out)
		}
	}
	for range 3 {
		for name := range best {
			out, err := exec.Command(filepath.Join(dir, name), "time", strconv.Itoa(repeats(o, 20))).Output()
			if err != nil {
				return 0, err
			}
			ms, err := strconv.ParseFloat(strings.Fields(string(out))[0], 64)
			if err != nil {
				return 0, err
			}
			best[name] = min(best[name], ms)
		}
	}
	return best["portable"] / best["native"], nil
}
