"""Thins a trace for drawing without losing a peak."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


def decimate(time_s: Floats, level: Floats, *, points: int) -> tuple[Floats, Floats]:
    """At most `points` samples of a trace: of each of points/2 equal bins of time the lowest and the highest.

    time_s : (n,), s, increasing.   level : (n,), any unit; nan where nothing is known (kept as a gap).
    points : even, at least 4. The first and the last sample stay. Returns two arrays of one length.
    """
    count = time_s.size
    if count <= points:
        return time_s, level
    bins = max(1, points // 2 - 1)
    span = float(time_s[-1] - time_s[0]) or 1.0
    place = np.minimum(((time_s - time_s[0]) * (bins / span)).astype(np.intp), bins - 1)
    edges = np.flatnonzero(np.diff(place, prepend=-1))
    keep = {0, count - 1}
    for start, stop in zip(edges, [*edges[1:], count], strict=True):
        chunk = level[start:stop]
        if np.all(np.isnan(chunk)):
            keep.add(int(start))
            continue
        keep.update((int(start + np.nanargmin(chunk)), int(start + np.nanargmax(chunk))))
    chosen = np.array(sorted(keep), dtype=np.intp)
    return time_s[chosen], level[chosen]
