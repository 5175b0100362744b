#!/usr/bin/env python3
"""Compares lapgate's objects with those of SEP, at equal thresholds, on the same frames.

Usage: crosscheck.py DIR     (DIR as written by `go run ./cmd/crosscheck DIR`)

SEP (Debian python3-sep; Barbary 2016, a library made from Source Extractor) gets
lapgate's background-subtracted frame, noise and mask, so that only filter, threshold,
connection and centres are compared, not the background:
  sep.extract(signal, k_low, err=noise, mask=outside, minarea=1, 5 x 5 binomial kernel,
              filter_type="matched", no deblending, no cleaning)
With these, SEP's detection statistic is sum(w d / s^2) / sqrt(sum(w^2 / s^2)), which for
noise that is even over the 5 x 5 is lapgate's snr plane, at the mask's edge too.

For the readable reference on all surfaces together, and for the fused pass on each surface:
  1. objects: every lapgate object whose peak is at k_high or more, and every SEP object
     likewise, must have one partner (the SEP segment at lapgate's peak) with an
     area within 2 px or 5 %. At least 99 % of those of either side.
  2. the same for all objects above k_low, noise included. At least 99 %.
  3. compact objects of 1 (area below 200 px): centres of gravity of the filtered signal
     within 0.1 px. At least 99 %.
  4. compact round objects of 1 that stand alone and whose peak is at 1.5 k_high or more (the
     centres of fainter ones follow the noise): the centre that lapgate reports against
     sep.winpos with the same window. At least 95 % within 0.1 px or 2 % of the diameter,
     median below 0.03 px.
For the fused pass, which takes level and noise from the counts by itself, an object without a
partner does not count where its peak is within 2 % of the threshold in question.
Exits 1 when one of them is missed, 2 when DIR cannot be read.
"""
import json
import os
import sys

import numpy as np
import sep

BINOMIAL = np.outer([1, 4, 6, 4, 1], [1, 4, 6, 4, 1]).astype(np.float32) / 256
GAIN = 70 / 256
COMPACT_PX = 200


def read(folder, frame):
    shape = (frame["height"], frame["width"])
    name = os.path.join(folder, frame["name"])
    signal = np.fromfile(name + ".signal", "<f4").reshape(shape)
    noise = np.fromfile(name + ".noise", "<f4").reshape(shape)
    inside = np.fromfile(name + ".mask", "u1").reshape(shape) == 1
    return signal, noise, inside


def extract(signal, noise, inside, k_low):
    objects, segments = sep.extract(
        signal, k_low, err=noise, mask=~inside, minarea=1, filter_kernel=BINOMIAL,
        filter_type="matched", deblend_nthresh=1, deblend_cont=1.0, clean=False,
        segmentation_map=True)
    peak = objects["cpeak"] / (GAIN * noise[objects["ycpeak"], objects["xcpeak"]])
    return objects, segments, peak


def same_area(a, b):
    return abs(a - b) <= max(2, 0.05 * max(a, b))


class Tally:
    """Differences of one kind, and how many were within the bound."""

    def __init__(self):
        self.values = []

    def add(self, value):
        self.values.append(value)

    def share(self, bound):
        return float(np.mean(np.array(self.values) <= bound)) if self.values else 0.0

    def median(self):
        return float(np.median(self.values)) if self.values else float("nan")


def partners(ours, theirs, segments):
    """Maps the index of a lapgate object to that of its SEP segment; one to one."""
    pairs, taken = {}, set()
    for i, o in enumerate(ours):
        label = int(segments[o["peak_y"], o["peak_x"]])
        if label and label not in taken and same_area(o["area_px"], int(theirs["npix"][label - 1])):
            pairs[i] = label - 1
            taken.add(label)
    return pairs


def count(pairs, our_peaks, their_peaks, threshold, near):
    """How many objects of either side with a peak at the threshold or more have a partner, and
    how many there are; those without one whose peak is within the share near above the
    threshold are left out."""
    back = set(pairs.values())
    with_partner = [(p, i in pairs) for i, p in enumerate(our_peaks)] + [(p, j in back) for j, p in enumerate(their_peaks)]
    kept = [ok for p, ok in with_partner if p >= threshold and (ok or p > threshold * (1 + near))]
    return sum(kept), len(kept)


def window_centre(signal, inside, ours):
    """sep.winpos with the window that lapgate uses: s^2 = (diameter/2.355)^2 - 1/2."""
    sigma = max((ours["diameter_px"] / 2.355) ** 2 - 0.5, 0.5) ** 0.5
    x, y, _ = sep.winpos(signal, [ours["x_px"]], [ours["y_px"]], [sigma], mask=~inside)
    return x[0], y[0]


def alone(i, ours, k_high):
    """Whether no other object of that height is so near that a window would see both."""
    o = ours[i]
    return not any(k != i and p["peak_sigma"] >= k_high and
                   np.hypot(p["x_px"] - o["x_px"], p["y_px"] - o["y_px"]) < p["length_px"] / 2 + 2 * o["diameter_px"]
                   for k, p in enumerate(ours))


class Comparison:
    """Objects of one kind (of the reference, or of the fused pass) against SEP's."""

    def __init__(self, name, near):
        self.name, self.near = name, near
        self.high, self.low = [0, 0], [0, 0]
        self.centres, self.windows = Tally(), Tally()

    def add(self, ours, found, signal, inside, document):
        theirs, segments, their_peaks = found
        pairs = partners(ours, theirs, segments)
        our_peaks = [o["peak_sigma"] for o in ours]
        for total, threshold in ((self.high, document["k_high"]), (self.low, document["k_low"])):
            hits, n = count(pairs, our_peaks, their_peaks, threshold, self.near)
            total[0] += hits
            total[1] += n
        for i, j in pairs.items():
            o, t = ours[i], theirs[j]
            if o["peak_sigma"] < document["k_high"] or o["area_px"] >= COMPACT_PX:
                continue
            self.centres.add(np.hypot(o["filtered_x"] - t["x"], o["filtered_y"] - t["y"]))
            bright = o["peak_sigma"] >= 1.5 * document["k_high"]
            if bright and o["length_px"] <= 2 * o["width_px"] and alone(i, ours, document["k_high"]):
                x, y = window_centre(signal, inside, o)
                self.windows.add(np.hypot(o["x_px"] - x, o["y_px"] - y) * min(1, 0.1 / (0.02 * o["diameter_px"])))

    def report(self, least):
        """Prints the shares and returns whether all are reached; least objects are needed."""
        good = self.windows.median() < 0.03 and self.high[1] >= least
        for name, share, wanted, n in [
            ("objects with a partner", self.high[0] / max(self.high[1], 1), 0.99, self.high[1]),
            ("all above k_low with a partner", self.low[0] / max(self.low[1], 1), 0.99, self.low[1]),
            ("compact centres within 0.1 px", self.centres.share(0.1), 0.99, len(self.centres.values)),
            ("reported centres within 0.1 px or 2 % of winpos", self.windows.share(0.1), 0.95, len(self.windows.values)),
        ]:
            good = good and share >= wanted
            print(f"{self.name}: {name}: {100 * share:.2f} % of {n}, want {100 * wanted:.0f} %")
        print(f"{self.name}: centres of gravity differ by {self.centres.median():.4f} px, "
              f"reported ones from winpos by {self.windows.median():.4f} px (medians)")
        return good


def compare(folder, document):
    reference, fused = Comparison("reference", 0), {}
    for frame in document["frames"]:
        signal, noise, inside = read(folder, frame)
        found = extract(signal, noise, inside, document["k_low"])
        reference.add(frame["objects"], found, signal, inside, document)
        surface = frame["surface"]
        if surface not in fused:
            fused[surface] = Comparison("fused pass, " + surface, 0.02)
        fused[surface].add(frame["fused"], found, signal, inside, document)
    return [reference] + list(fused.values())


def main():
    if len(sys.argv) != 2:
        print(__doc__)
        return 2
    try:
        with open(os.path.join(sys.argv[1], "objects.json"), encoding="utf-8") as f:
            document = json.load(f)
        comparisons = compare(sys.argv[1], document)
    except (OSError, ValueError, KeyError) as problem:
        print(f"crosscheck: cannot read {sys.argv[1]}: {problem!r}", file=sys.stderr)
        return 2
    good = [c.report(100) for c in comparisons]  # each of them prints, whatever the others say
    print("crosscheck with SEP", sep.__version__, "passed" if all(good) else "FAILED")
    return 0 if all(good) else 1


if __name__ == "__main__":
    sys.exit(main())
