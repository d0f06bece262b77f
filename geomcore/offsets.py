"""Offsets in a horizon that no picked fault explains: found, never smoothed over."""

from dataclasses import dataclass

import numpy as np

__all__ = ["UnpickedOffset", "pick_scatter", "unpicked_offsets"]

#: Picks either side whose line says where the horizon would go on; Theil-Sen lines, so
#: that one wild pick makes no offset.
SIDE = 5
#: An offset stands out by this many times the error of a pick (common practice, no
#: source: robust lines of five picks err by about twice a pick at their end).
STANDS_OUT = 8.0
#: Picks that a tracker or gridder may have drawn across the offset.
BRIDGED = 2
#: Picks either side miss their line by less than this share of a step, one excepted.
FITS = 0.25


@dataclass(frozen=True)
class UnpickedOffset:
    """A step in a horizon.

    Parameters
    ----------
    x : float
        Middle of the gap it lies in.
    size : float
        Change of z beyond what the slopes on both sides explain, outwards: negative
        is down.
    """

    x: float
    size: float


def unpicked_offsets(x, z, sigma, least=0.0, longest=np.inf, known=()):
    """Find steps that neither the slope on both sides nor the errors explain.

    Parameters
    ----------
    x, z, sigma : ndarray (n,)
        Picks of one horizon in one wall, x growing.
    least : float
        Steps smaller than this are not reported.
    longest : float
        Gaps between picks longer than this are not judged.
    known : sequence of tuple (x, x)
        Where picked faults cut the horizon.

    Returns
    -------
    list of UnpickedOffset
        In order of x, one a step.

    Notes
    -----
    Between two picks the horizon may change by anything between what the slopes of
    the lines either side give; what is beyond is the step. The error of a pick is its
    sigma, or the scatter of the picks about neighbours where that is larger.
    """
    steps = [_steps(x, z, n + 1, longest) for n in range(BRIDGED + 1)]
    first, last, size = np.concatenate(steps, axis=1)
    first, last = first.astype(int), last.astype(int)
    error = max(float(np.median(sigma)), pick_scatter(x, z)) if len(x) else 0.0
    found = np.abs(size) > max(STANDS_OUT * error, least, 1e-6)
    for low, high in known:
        found &= (x[last] <= low) | (x[first] >= high)
    chosen = []
    # the largest stands for all whose lines reach over it
    for i in sorted(np.flatnonzero(found), key=lambda i: -abs(size[i])):
        if all(
            first[i] >= last[j] + SIDE - 1 or last[i] <= first[j] - SIDE + 1
            for j in chosen
        ):
            chosen.append(i)
    return [
        UnpickedOffset(float(0.5 * (x[first[i]] + x[last[i]])), float(size[i]))
        for i in sorted(chosen, key=lambda i: first[i])
    ]


def pick_scatter(x, z):
    """Give the error of picks from how they miss the line through their neighbours."""
    if len(x) < 3:
        return 0.0
    f = (x[1:-1] - x[:-2]) / (x[2:] - x[:-2])
    miss = z[1:-1] - (1 - f) * z[:-2] - f * z[2:]
    per_pick = np.sqrt(1.0 + (1 - f) ** 2 + f**2)
    return float(1.4826 * np.median(np.abs(miss / per_pick)))


def _steps(x, z, apart, longest):
    """Give steps between picks so many places apart: (first, last, step) as rows.

    Only where the picks either side lie on their lines, one of them excepted but not
    the nearest: a window that reaches over another step or a kink says nothing.
    """
    count = len(x) - 2 * SIDE - apart + 1
    if count < 1:
        return np.empty((3, 0))
    windows = np.lib.stride_tricks.sliding_window_view
    xs, zs = windows(x, SIDE), windows(z, SIDE)
    first = np.arange(count) + SIDE - 1
    last = first + apart
    slope_left, level_left, poor_left = _line(xs[:count], zs[:count], -1)
    slope_right, level_right, poor_right = _line(xs[last], zs[last], 0)
    width = x[last] - x[first]
    change = level_right - level_left
    low = np.minimum(slope_left, slope_right) * width
    high = np.maximum(slope_left, slope_right) * width
    step = np.where(change > high, change - high, np.minimum(change - low, 0.0))
    judged = width <= longest
    judged &= np.maximum(poor_left, poor_right) <= FITS * np.abs(step)
    return np.array([first, last, step])[:, judged]


def _line(x, z, end):
    """Theil-Sen lines of windows (n, k): slopes, levels at an end, how they miss."""
    i, j = np.triu_indices(x.shape[1], 1)
    slope = np.median((z[:, j] - z[:, i]) / (x[:, j] - x[:, i]), axis=1)
    off = z - slope[:, None] * (x - x[:, end, None])
    level = np.median(off, axis=1)
    miss = np.abs(off - level[:, None])
    return slope, level, np.maximum(np.sort(miss, axis=1)[:, -2], miss[:, end])
