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

  1. objects: every lapgate object whose peak is at k_high or more, and every SEP object
     likewise, must have one partner (the SEP segment at lapgate's peak) with an
     area within 2 px or 5 %. At least 99 % of those of either side.
  2. the same for all objects above k_low, noise included. At least 99 %.
  3. compact objects of 1 (area below 200 px): centres of gravity of the filtered signal
     within 0.1 px. At least 99 %.
  4. compact round objects of 1: the centre that lapgate reports against sep.winpos with
     the same window. At least 95 % within 0.1 px, median below 0.03 px.
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


def matched_share(ours, pairs, theirs_kept, ours_kept):
    """How many kept objects of either side have a partner, and how many there are."""
    back = {j for j in pairs.values()}
    hits = sum(i in pairs for i in ours_kept) + sum(j in back for j in theirs_kept)
    return hits, len(ours_kept) + len(theirs_kept)


def window_centre(signal, inside, ours):
    """sep.winpos with the window that lapgate uses: s^2 = (diameter/2.355)^2 - 1/2."""
    sigma = max((ours["diameter_px"] / 2.355) ** 2 - 0.5, 0.5) ** 0.5
    x, y, _ = sep.winpos(signal, [ours["x_px"]], [ours["y_px"]], [sigma], mask=~inside)
    return x[0], y[0]


def compare(folder, document):
    totals = {"high": [0, 0], "low": [0, 0]}
    centres, windows = Tally(), Tally()
    for frame in document["frames"]:
        signal, noise, inside = read(folder, frame)
        theirs, segments, peak = extract(signal, noise, inside, document["k_low"])
        ours = frame["objects"]
        pairs = partners(ours, theirs, segments)
        high = [i for i, o in enumerate(ours) if o["peak_sigma"] >= document["k_high"]]
        their_high = [j for j in range(len(theirs)) if peak[j] >= document["k_high"]]
        for key, a, b in (("high", their_high, high), ("low", range(len(theirs)), range(len(ours)))):
            hits, n = matched_share(ours, pairs, a, b)
            totals[key][0] += hits
            totals[key][1] += n
        for i in high:
            if i not in pairs or ours[i]["area_px"] >= COMPACT_PX:
                continue
            o, t = ours[i], theirs[pairs[i]]
            centres.add(np.hypot(o["filtered_x"] - t["x"], o["filtered_y"] - t["y"]))
            if o["length_px"] <= 2 * o["width_px"]:
                x, y = window_centre(signal, inside, o)
                windows.add(np.hypot(o["x_px"] - x, o["y_px"] - y))
    return totals, centres, windows


def main():
    if len(sys.argv) != 2:
        print(__doc__)
        return 2
    try:
        with open(os.path.join(sys.argv[1], "objects.json"), encoding="utf-8") as f:
            document = json.load(f)
        totals, centres, windows = compare(sys.argv[1], document)
    except (OSError, ValueError, KeyError) as problem:
        print(f"crosscheck: cannot read {sys.argv[1]}: {problem!r}", file=sys.stderr)
        return 2
    checks = [
        ("objects with a partner", totals["high"][0] / max(totals["high"][1], 1), 0.99, totals["high"][1]),
        ("all above k_low with a partner", totals["low"][0] / max(totals["low"][1], 1), 0.99, totals["low"][1]),
        ("compact centres within 0.1 px", centres.share(0.1), 0.99, len(centres.values)),
        ("reported centres within 0.1 px of winpos", windows.share(0.1), 0.95, len(windows.values)),
    ]
    good = windows.median() < 0.03 and totals["high"][1] >= 100
    for name, share, least, n in checks:
        good = good and share >= least
        print(f"{name}: {100 * share:.2f} % of {n}, want {100 * least:.0f} %")
    print(f"centres of gravity differ by {centres.median():.4f} px, reported ones from winpos by {windows.median():.4f} px (medians)")
    print("crosscheck with SEP", sep.__version__, "passed" if good else "FAILED")
    return 0 if good else 1


if __name__ == "__main__":
    sys.exit(main())
