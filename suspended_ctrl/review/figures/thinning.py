"""Long series made short without losing their peaks."""

import numpy as np

from suspended_ctrl.rig.frozen import Array


def thinned(time: Array, series: Array, buckets: int = 700) -> tuple[Array, Array]:
    """
    Keep the least and the greatest value of each stretch of time.

    Parameters
    ----------
    time, series : ndarray, shape (n,)
        Rising, and the values then.
    buckets : int
        Stretches; the result has twice as many points at most.

    Returns
    -------
    time, series : ndarray, shape (m,)
        In the order of time; the series itself where it is short.

    """
    count = len(time)
    if count <= 2 * buckets:
        return time, series
    edges = np.linspace(0, count, buckets + 1).astype(int)
    keep = {0, count - 1}
    for first, last in zip(edges[:-1].tolist(), edges[1:].tolist(), strict=True):
        part = series[first:last]
        keep.add(first + int(np.argmin(part)))
        keep.add(first + int(np.argmax(part)))
    chosen = np.array(sorted(keep))
    return time[chosen], series[chosen]


def bucketed(series: Array, count: int) -> Array:
    """Greatest value in each of ``count`` stretches, shape (n,) to (count,)."""
    edges = np.linspace(0, len(series), count + 1).astype(int)
    return np.array([series[a:max(b, a + 1)].max()
                     for a, b in zip(edges[:-1].tolist(), edges[1:].tolist(), strict=True)])
