#!/usr/bin/python3
"""Lay and orange peel of a polished surface, by the spectrum of overlapping tiles.

Each tile inside the region loses its mean and slope, is weighted by a Hann window, and
its power spectrum is summed over two bands of wavelength: lay (fine lines that a tool
left) and orange peel (coarse, without direction). By Parseval's theorem the sum over a
band, over (pixels × sum of squared weights), is the variance in that band; the level of
white noise, the median of the power beyond both bands, is taken off. Lay has an angle:
half the phase of the spectrum's mean of exp(2i·direction), as its waves run across it.
"""

import numpy as np

import lapgate_stage as lap

SETTINGS = {
    "tile_px": 128,            # side of a tile; tiles overlap by half
    "lay_min_um": 40.0,        # wavelengths of lay
    "lay_max_um": 250.0,
    "peel_min_um": 250.0,      # wavelengths of orange peel
    "peel_max_um": 1000.0,     # a tile must hold a quarter more than the longest
    "max_lay_percent": 10.0,   # of the tile's level, root mean square; 0 = no limit
    "max_peel_percent": 5.0,
}


def check(s):
    wrong = {}
    if s.tile_px < 16 or s.tile_px > 1024:
        wrong["tile_px"] = f"got {s.tile_px}, want 16 to 1024"
    for low, high in (("lay_min_um", "lay_max_um"), ("peel_min_um", "peel_max_um")):
        if not 0 < getattr(s, low) < getattr(s, high):
            wrong[low] = f"got {getattr(s, low):g}, want above 0 and below {high} ({getattr(s, high):g})"
    for key in ("max_lay_percent", "max_peel_percent"):
        if not 0 <= getattr(s, key) <= 1000:
            wrong[key] = f"got {getattr(s, key):g}, want 0 (no limit) to 1000"
    return wrong


def tiles_of(picture, size):
    """Returns overlapping tiles, rows × columns × size × size, and the places of their corners."""
    hop = size // 2
    windows = np.lib.stride_tricks.sliding_window_view(picture, (size, size))[::hop, ::hop]
    return windows, hop


def detrended(tiles):
    """Takes mean and slope off each tile (n × size × size)."""
    size = tiles.shape[-1]
    t = np.arange(size) - (size - 1) / 2
    scale = (t**2).sum() * size
    out = tiles - tiles.mean(axis=(1, 2), keepdims=True)
    for axis in (t[None, None, :], t[None, :, None]):
        out = out - (out * axis).sum(axis=(1, 2), keepdims=True) / scale * axis
    return out


def spectrum(tiles):
    """Returns the power of each tile such that its sum over all bins is the variance."""
    size = tiles.shape[-1]
    hann = 0.5 - 0.5 * np.cos(2 * np.pi * (np.arange(size) + 0.5) / size)
    weights = hann[:, None] * hann[None, :]
    return np.abs(np.fft.fft2(tiles * weights)) ** 2 / (size**2 * (weights**2).sum())


def bands(power, um_per_px, s):
    """Returns per tile the variances of lay and peel without white noise, and lay's axis."""
    size = power.shape[-1]
    f = np.fft.fftfreq(size) / um_per_px  # cycles per µm
    fx, fy = f[None, :], f[:, None]
    radius = np.hypot(fx, fy)
    lay = (radius >= 1 / s.lay_max_um) & (radius <= 1 / s.lay_min_um)
    peel = (radius >= 1 / s.peel_max_um) & (radius < 1 / s.peel_min_um)
    beyond = radius > max(1 / s.lay_min_um, 1 / s.peel_min_um)
    white = np.median(power[:, beyond], axis=1) / np.log(2) if beyond.any() else np.zeros(len(power))
    twice = np.exp(2j * np.arctan2(fy + 0 * fx, fx + 0 * fy))
    above = np.maximum(power[:, lay] - white[:, None], 0)
    axis = (above * twice[lay]).sum(axis=1)
    lay_variance = np.maximum((power[:, lay] - white[:, None]).sum(axis=1), 0)
    peel_variance = np.maximum((power[:, peel] - white[:, None]).sum(axis=1), 0)
    return lay_variance, peel_variance, axis, above.sum(axis=1)


def patches(over):
    """Returns the connected sets of tiles (rows × columns of bool), each as a list of y, x."""
    left, out = {tuple(p) for p in np.argwhere(over)}, []
    while left:
        waiting, patch = [left.pop()], []
        while waiting:
            y, x = waiting.pop()
            patch.append((y, x))
            near = {(y + dy, x + dx) for dy in (-1, 0, 1) for dx in (-1, 0, 1)} & left
            left -= near
            waiting += near
        out.append(sorted(patch))
    return sorted(out)


def mark(item, over, size, hop):
    """Adds a stain for every patch of tiles over a limit."""
    for patch in patches(over):
        covered = np.zeros((item.frame.shape), bool)
        for y, x in patch:
            covered[y * hop : y * hop + size, x * hop : x * hop + size] = True
        ys, xs = np.nonzero(covered)
        area = len(ys)
        item.defect("stain", xs.mean(), ys.mean(), box=(xs.min(), ys.min(), xs.max() + 1, ys.max() + 1), area_px=area,
                    diameter_px=2 * np.sqrt(area / np.pi), length_px=max(np.ptp(xs), np.ptp(ys)) + 1, width_px=min(np.ptp(xs), np.ptp(ys)) + 1)


def run(item, s):
    frame, scale, size = item.frame, item.um_per_px, s.tile_px
    if scale <= 0:
        raise lap.BadInput("the view has no scale")
    if size * scale < 1.25 * s.peel_max_um:
        raise lap.BadInput(f"tile_px: {size} px are {size * scale:g} µm, want at least {1.25 * s.peel_max_um:g} for peel_max_um")
    if s.lay_min_um < 2 * scale:
        raise lap.BadInput(f"lay_min_um: {s.lay_min_um:g} µm is finer than two pixels of {scale:g} µm")
    if min(frame.shape) < size:
        item.hold(f"the frame is smaller than one tile of {size} px")
        return
    region = item.region
    windows, hop = tiles_of(frame, size)
    inside = np.ones(windows.shape[:2], bool)
    if region is not None:
        inside = tiles_of(region, size)[0].all(axis=(2, 3))
    item.measure("texture_tiles", inside.sum())
    if not inside.any():
        item.hold(f"no tile of {size} px lies inside the region: texture was not inspected")
        return
    tiles = windows[inside].astype(np.float64)
    level = np.maximum(tiles.mean(axis=(1, 2)), 1e-9)
    lay, peel, axis, total = bands(spectrum(detrended(tiles)), scale, s)
    percent = np.zeros((2,) + inside.shape)
    percent[0][inside], percent[1][inside] = 100 * np.sqrt(lay) / level, 100 * np.sqrt(peel) / level
    item.measure("lay_rms_dn", np.sqrt(np.median(lay)), "DN")
    item.measure("lay_worst_percent", percent[0].max(), "%")
    item.measure("peel_rms_dn", np.sqrt(np.median(peel)), "DN")
    item.measure("peel_worst_percent", percent[1].max(), "%")
    direction = np.degrees(np.angle(axis.sum())) / 2 + 90  # lines run across their waves
    item.measure("lay_angle_deg", (direction + 90) % 180 - 90, "deg")
    item.measure("lay_directedness", np.abs(axis).sum() / max(total.sum(), 1e-300), "1")
    over = np.zeros(inside.shape, bool)
    for share, limit in zip(percent, (s.max_lay_percent, s.max_peel_percent)):
        over |= (limit > 0) & (share > limit)
    mark(item, over, size, hop)
    for name, share in (("lay", percent[0]), ("peel", percent[1])):
        item.write(name + "_percent", share, "%", step=hop, origin=((size - 1) / 2, (size - 1) / 2))


if __name__ == "__main__":
    lap.serve(type="texture", version="1", summary="Measures lay and orange peel by the spectrum of tiles and marks where they pass a limit.",
              reads=["raw", "region"], writes=["defects", "lay_percent", "peel_percent", "measurements"], settings=SETTINGS, check=check, run=run)
