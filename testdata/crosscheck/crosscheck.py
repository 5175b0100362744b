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

For the readable reference and for the fused pass, on each surface:
  1. objects: every lapgate object whose peak is at k_high or more, and every SEP object
     likewise, has one partner on the other side, the SEP segment at lapgate's peak, unless
     its peak is within 2 % above k_high (and the partner's within 2 % below it).
  2. things: the same for all that is above k_low, noise included.
  3. sizes of the objects of 1 that have partners: diameters of a circle with the area above
     k_low within 2 %, or areas within 2 px, as pixels are whole. SEP's pixels outside the
     region do not count. (SEP measures no size at half height; lapgate's is held against the
     reference.)
  4. centres of the compact ones (area below 200 px): centres of gravity of the filtered
     signal within 0.1 px.
  5. compact round objects of 1 that stand alone, not by the region's edge, and whose peak is at 1.5 k_high or more (the
     centres of fainter ones follow the noise): the centre that lapgate reports against
     sep.winpos with the same window. Within 0.1 px or 2 % of the diameter, median below
     0.03 px.
Everything for which one of these does not hold is printed, and counted against ALLOWED.
Exits 1 when there are more, 2 when DIR cannot be read.
"""
import json
import os
import sys

import numpy as np
import sep

BINOMIAL = np.outer([1, 4, 6, 4, 1], [1, 4, 6, 4, 1]).astype(np.float32) / 256
GAIN = 70 / 256
COMPACT_PX = 200
NEAR = 0.02

# How many exceptions of a kind the fused pass may have on a surface; the reference none. The
# pass takes level and noise from the counts by itself, and which values of a cell it clips
# is not always the same: what is just above k_low may be missed, and a pixel near k_low more
# or less moves the centre of an object of few pixels.
ALLOWED = {"objects": 0, "things": 1, "sizes": 0, "centres": 1, "reported centres": 0}


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


def same_size(a, b):
    return abs(a - b) <= 2 or abs((a / b) ** 0.5 - 1) <= 0.02


def partners(ours, segments):
    """Maps the index of a lapgate object to that of its SEP segment; one to one."""
    pairs, taken = {}, set()
    for i, o in sorted(enumerate(ours), key=lambda pair: -pair[1]["peak_sigma"]):
        label = int(segments[o["peak_y"], o["peak_x"]])
        if label and label not in taken:
            pairs[i] = label - 1
            taken.add(label)
    return pairs


def unmatched(peaks, other_peaks, threshold, k_low):
    """Which of one side's peaks (at the threshold or more) have none on the other side; a
    peak is NaN where there is no partner. What has a partner at all is a thing on both sides,
    and what is near k_low need not have one."""
    for i, (p, q) in enumerate(zip(peaks, other_peaks)):
        near = p <= threshold * (1 + NEAR)
        if threshold == k_low:
            good = near or not np.isnan(q)
        else:
            good = q >= threshold * (1 - NEAR if near else 1)
        if p >= threshold and not good:
            yield i


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


def amid(inside, o):
    """Whether all that the window sees lies in the region."""
    reach = int(2 * o["diameter_px"]) + 1
    x, y = o["peak_x"], o["peak_y"]
    return bool(inside[max(y - reach, 0):y + reach + 1, max(x - reach, 0):x + reach + 1].all())


class Comparison:
    """Objects of one kind (of the reference, or of the fused pass) on a surface against SEP's."""

    def __init__(self, name, allowed):
        self.name, self.allowed = name, allowed
        self.exceptions = {kind: [] for kind in ALLOWED}
        self.counts = {kind: 0 for kind in ALLOWED}
        self.centres, self.windows = [], []

    def hold(self, kind, good, text):
        self.counts[kind] += 1
        if not good:
            self.exceptions[kind].append(text)

    def sides(self, where, pairs, ours, theirs, their_peaks, document):
        """Rules 1 and 2, for both sides."""
        back = {j: i for i, j in pairs.items()}
        our_peaks = [o["peak_sigma"] for o in ours]
        partner = [their_peaks[pairs[i]] if i in pairs else np.nan for i in range(len(ours))]
        theirs_partner = [our_peaks[back[j]] if j in back else np.nan for j in range(len(theirs))]
        places = [f"({o['peak_x']}, {o['peak_y']}), {o['area_px']} px" for o in ours]
        their_places = [f"({t['xcpeak']}, {t['ycpeak']}), {t['npix']} px" for t in theirs]
        for kind, threshold in (("objects", document["k_high"]), ("things", document["k_low"])):
            for side, peaks, others, at in (("lapgate's", our_peaks, partner, places), ("SEP's", their_peaks, theirs_partner, their_places)):
                self.counts[kind] += sum(p >= threshold for p in peaks)
                for i in unmatched(peaks, others, threshold, document["k_low"]):
                    self.exceptions[kind].append(f"{where}: {side} at {at[i]}, peak {peaks[i]:.3f} sigmas; partner's peak {others[i]:.3f}")

    def add(self, ours, found, signal, inside, document, where):
        theirs, segments, their_peaks = found
        pairs = partners(ours, segments)
        areas = np.bincount(segments[inside], minlength=len(theirs) + 1)[1:]
        self.sides(where, pairs, ours, theirs, their_peaks, document)
        for i, j in pairs.items():
            o, t = ours[i], theirs[j]
            if o["peak_sigma"] < document["k_high"]:
                continue
            at = f"{where}: at ({o['peak_x']}, {o['peak_y']}), peak {o['peak_sigma']:.3f} sigmas, {o['area_px']} px (SEP {areas[j]})"
            self.hold("sizes", same_size(o["area_px"], areas[j]), at)
            if o["area_px"] >= COMPACT_PX:
                continue
            off = np.hypot(o["filtered_x"] - t["x"], o["filtered_y"] - t["y"])
            self.centres.append(off)
            self.hold("centres", off <= 0.1, f"{at}: off by {off:.3f} px")
            bright = o["peak_sigma"] >= 1.5 * document["k_high"]
            if bright and o["length_px"] <= 2 * o["width_px"] and alone(i, ours, document["k_high"]) and amid(inside, o):
                x, y = window_centre(signal, inside, o)
                off = np.hypot(o["x_px"] - x, o["y_px"] - y)
                self.windows.append(off)
                self.hold("reported centres", off <= max(0.1, 0.02 * o["diameter_px"]), f"{at}: off by {off:.3f} px")

    def report(self, least):
        """Prints the counts and every exception and returns whether all is within the bounds;
        least objects are needed on both sides together, and a tenth of that of centres."""
        good = self.counts["objects"] >= least and len(self.windows) >= least / 10 and np.median(self.windows) < 0.03
        for kind, allowed in self.allowed.items():
            found = self.exceptions[kind]
            good = good and len(found) <= allowed
            print(f"{self.name}: {kind}: {self.counts[kind]}, exceptions: {len(found)}, allowed: {allowed}")
            for text in found:
                print("  exception: " + text)
        print(f"{self.name}: centres of gravity differ by {np.median(self.centres or [np.nan]):.4f} px, "
              f"reported ones from winpos by {np.median(self.windows or [np.nan]):.4f} px (medians)")
        return good


def compare(folder, document):
    comparisons = {}
    for frame in document["frames"]:
        signal, noise, inside = read(folder, frame)
        found = extract(signal, noise, inside, document["k_low"])
        for name, ours, allowed in (("reference, ", frame["objects"], dict.fromkeys(ALLOWED, 0)), ("fused pass, ", frame["fused"], ALLOWED)):
            name += frame["surface"]
            comparisons.setdefault(name, Comparison(name, allowed)).add(ours, found, signal, inside, document, frame["name"])
    return list(comparisons.values())


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
