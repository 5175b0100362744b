#!/usr/bin/env python3
"""Runs the detection job with general libraries, one run for each line that comes in.

Usage: compare.py DIR     (started by `go run ./cmd/bench compare`, which writes DIR)

DIR holds frame.json (width, height, k_low, k_high) and, row by row from the top, raw.u8,
dark.f32, gain.f32 and bad.u8. Each line of the input names a method; each is answered by
one line of JSON: clock_ms, cpu_ms (of all threads), and the centres of the objects found.

  plain     float32; background = Gaussian blur, sigma 24 px; sigma = 1.4826 times the
            median absolute deviation of the whole frame
  tuned1/2  float32, memory made once; background and noise on a picture reduced 16-fold;
            OpenCV with 1 or 2 threads
  sep       flat-field with numpy; SEP's background and noise (64 px cells, 3 x 3 median),
            evaluated, and its extraction with a matched filter

All filter with the 5 x 5 binomial kernel, connect pixels above k_low sigmas of the
filter's output to 8 neighbours, and keep what has a peak of k_high or more; for each object
kept they measure bounding box, area, peak, flux, weighted centre and second moments.
Debian's python3-opencv, python3-sep and python3-numpy.
"""
import json
import os
import sys
import time

import cv2
import numpy as np
import sep

KERNEL = np.array([1, 4, 6, 4, 1], np.float32) / 16
BINOMIAL = np.outer(KERNEL, KERNEL)
GAIN = 70 / 256  # noise gain of the kernel on white noise: the root of the sum of its squares
REDUCTION = 16
MEAN_TO_SIGMA = 1.2533141  # of a normal distribution: root of pi / 2


class Job:
    """A frame with its calibration."""

    def __init__(self, folder):
        with open(os.path.join(folder, "frame.json"), encoding="utf-8") as f:
            frame = json.load(f)
        self.k_low, self.k_high = frame["k_low"], frame["k_high"]
        shape = (frame["height"], frame["width"])

        def load(name, kind):
            return np.fromfile(os.path.join(folder, name), kind).reshape(shape)

        self.raw, self.dark, self.gain = load("raw.u8", "u1"), load("dark.f32", "<f4"), load("gain.f32", "<f4")
        self.bad = np.flatnonzero(load("bad.u8", "u1"))
        x = self.bad % shape[1]
        self.left, self.right = self.bad - (x > 0), self.bad + (x < shape[1] - 1)
        self.small = (shape[1] // REDUCTION, shape[0] // REDUCTION)
        self.whole = (shape[1], shape[0])
        self.memory = [np.empty(shape, np.float32) for _ in range(4)]

    def replace_bad(self, signal):
        flat = signal.reshape(-1)
        flat[self.bad] = (flat[self.left] + flat[self.right]) / 2

    def plain(self):
        signal = (self.raw.astype(np.float32) - self.dark) * self.gain
        self.replace_bad(signal)
        signal = signal - cv2.GaussianBlur(signal, (0, 0), 24)
        sigma = 1.4826 * np.median(np.abs(signal - np.median(signal)))
        snr = cv2.filter2D(signal, -1, BINOMIAL) / (GAIN * sigma)
        _, labels, stats, _ = cv2.connectedComponentsWithStats((snr > self.k_low).astype(np.uint8), connectivity=8)
        return measure(signal, labels, stats, np.unique(labels[snr >= self.k_high]))

    def tuned(self):
        signal, level, noise, snr = self.memory
        cv2.subtract(self.raw, self.dark, dst=signal, dtype=cv2.CV_32F)
        cv2.multiply(signal, self.gain, dst=signal)
        self.replace_bad(signal)
        small = cv2.medianBlur(cv2.resize(signal, self.small, interpolation=cv2.INTER_AREA), 5)
        cv2.resize(small, self.whole, dst=level, interpolation=cv2.INTER_LINEAR)
        cv2.subtract(signal, level, dst=signal)
        cv2.absdiff(signal, 0.0, dst=snr)
        small = cv2.medianBlur(cv2.resize(snr, self.small, interpolation=cv2.INTER_AREA), 5)
        cv2.resize(small * (MEAN_TO_SIGMA * GAIN), self.whole, dst=noise, interpolation=cv2.INTER_LINEAR)
        cv2.sepFilter2D(signal, -1, KERNEL, KERNEL, dst=level)
        cv2.divide(level, noise, dst=snr)
        above = cv2.compare(snr, self.k_low, cv2.CMP_GT)
        _, labels, stats, _ = cv2.connectedComponentsWithStatsWithAlgorithm(above, 8, cv2.CV_32S, cv2.CCL_BBDT)
        peaks = cv2.findNonZero(cv2.compare(snr, self.k_high, cv2.CMP_GE))
        kept = np.unique(labels[peaks[:, 0, 1], peaks[:, 0, 0]]) if peaks is not None else []
        return measure(signal, labels, stats, kept)

    def sep(self):
        signal = (self.raw.astype(np.float32) - self.dark) * self.gain
        self.replace_bad(signal)
        mesh = sep.Background(signal, bw=64, bh=64, fw=3, fh=3)
        noise = mesh.rms()
        signal = signal - mesh.back()
        found = sep.extract(signal, self.k_low, err=noise, minarea=1, filter_kernel=BINOMIAL, filter_type="matched",
                            deblend_nthresh=1, deblend_cont=1.0, clean=False)
        peak = found["cpeak"] / (GAIN * noise[found["ycpeak"], found["xcpeak"]])
        found = found[peak >= self.k_high]
        return list(zip(found["x"].tolist(), found["y"].tolist()))


def measure(signal, labels, stats, kept):
    """Measures the components kept, but for 0, the background; returns their centres."""
    centres = []
    for k in kept:
        if k == 0:
            continue
        x, y, w, h, _ = stats[k]
        inside = labels[y:y + h, x:x + w] == k
        v, u = np.nonzero(inside)
        weight = np.maximum(signal[y:y + h, x:x + w][inside], 0)
        flux = weight.sum()
        if flux <= 0:
            continue
        mx, my = (weight * u).sum() / flux, (weight * v).sum() / flux
        moments = [(weight * a * b).sum() / flux for a, b in ((u - mx, u - mx), (v - my, v - my), (u - mx, v - my))]
        centres.append((float(x + mx), float(y + my), float(weight.max()), moments)[:2])
    return centres


def main():
    if len(sys.argv) != 2:
        print(__doc__, file=sys.stderr)
        return 2
    job = Job(sys.argv[1])
    sep.set_extract_pixstack(3_000_000)
    methods = {"plain1": (job.plain, 1), "plain2": (job.plain, 2), "tuned1": (job.tuned, 1), "tuned2": (job.tuned, 2), "sep": (job.sep, 1)}
    print(json.dumps({"opencv": cv2.__version__, "sep": sep.__version__, "numpy": np.__version__, "methods": sorted(methods)}), flush=True)
    for line in sys.stdin:
        run, threads = methods[line.strip()]
        cv2.setNumThreads(threads)
        clock, cpu = time.perf_counter(), time.process_time()
        centres = run()
        clock, cpu = time.perf_counter() - clock, time.process_time() - cpu
        print(json.dumps({"clock_ms": 1000 * clock, "cpu_ms": 1000 * cpu, "centres": centres}), flush=True)
    return 0


if __name__ == "__main__":
    sys.exit(main())
