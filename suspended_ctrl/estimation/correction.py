"""
Measurement update of the 24 errors, with a gate and a monitor of the stamps beside it.

The monitor is the separate-bias estimator of Friedland (IEEE TAC 14(4), 1969): the innovations
answer linearly to a constant offset of the pose stamps, through a sensitivity that is carried
along with the state; the filter itself knows nothing of it.
"""

from numba import types
import numpy as np

from suspended_ctrl.physics.kernel import kernel, MATRIX, OUT_MATRIX, OUT_VECTOR, VECTOR
from suspended_ctrl.rig.frozen import Array


@kernel(types.void(OUT_MATRIX, MATRIX, VECTOR, MATRIX, MATRIX, VECTOR, VECTOR, OUT_VECTOR,
                   OUT_MATRIX, OUT_VECTOR))
def correct(p: Array, h: Array, nu: Array, noise: Array, common: Array, drift: Array,
            options: Array, lag: Array, gain: Array, out: Array) -> None:
    """
    Gate a measurement and absorb it.

    Parameters
    ----------
    p : ndarray, shape (24, 24)
        Covariance, changed in place if absorbed; stays symmetric to the last bit.
    h : ndarray, shape (m, 24)
        Derivative of what is measured by the errors.
    nu : ndarray, shape (m,)
        Innovation.
    noise : ndarray, shape (m, m)
        Covariance of the innovation's noise.
    common : ndarray, shape (m, 24) or (0, 24)
        Covariance of that noise and the errors; no rows where they have nothing in common.
    drift : ndarray, shape (m,) or longer
        Direct answer of the innovation to an offset of the stamp; zeros where there is none.
    options : ndarray, shape (4,)
        Gate on the squared distance (inf: none); the monitor's offset (s) and its variance (s^2);
        whether this measurement teaches the monitor (above zero).
    lag : ndarray, shape (24,)
        Shift of the state for each second of offset of the stamps, changed if absorbed.
    gain : ndarray, shape (24, m)
        Out: the gain.
    out : ndarray, shape (29,)
        Out: correction of the errors 0:24, squared distance of the innovation 24, of the
        innovation with the offset's part taken out 25, absorbed (1 or 0) 26, the monitor's offset
        27 and variance 28.

    """
    m = h.shape[0]
    # g = p h' and what is in common, as rows.
    g = np.zeros((m, 24))
    for k in range(m):
        for i in range(24):
            a = h[k, i]
            if a != 0.0:
                for n in range(24):
                    g[k, n] += a * p[i, n]
    shared = common.shape[0] == m
    if shared:
        for k in range(m):
            for n in range(24):
                g[k, n] += common[k, n]
    low = np.zeros((m, m))
    y = np.empty(m)
    z = np.empty(m)
    for k in range(m):
        total = drift[k]
        for i in range(24):
            total -= h[k, i] * lag[i]
        z[k] = total
        for i in range(k + 1):
            total = noise[k, i]
            for n in range(24):
                total += h[i, n] * g[k, n]
            if shared:
                for n in range(24):
                    total += h[k, n] * common[i, n]
            for n in range(i):
                total -= low[k, n] * low[i, n]
            if i == k:
                low[k, k] = np.sqrt(total)
            else:
                low[k, i] = total / low[i, i]
    # y, z: innovation and sensitivity in units of the innovation's own spread; g likewise.
    distance = 0.0
    yz = 0.0
    zz = 0.0
    offset = options[1]
    variance = options[2]
    for k in range(m):
        total = nu[k]
        answer = z[k]
        for i in range(k):
            total -= low[k, i] * y[i]
            answer -= low[k, i] * z[i]
        y[k] = total / low[k, k]
        z[k] = answer / low[k, k]
        distance += y[k] * y[k]
        zz += z[k] * z[k]
        yz += y[k] * z[k]
    # The same distance with the offset taken out and its uncertainty put in.
    left = yz - offset * zz
    inside = distance - 2.0 * offset * yz + offset * offset * zz
    if variance > 0.0:
        inside -= left * left / (1.0 / variance + zz)
    out[24] = distance
    out[25] = inside
    out[26] = 0.0
    out[27] = offset
    out[28] = variance
    if not inside <= options[0]:
        return
    out[26] = 1.0
    if options[3] > 0.0 and variance > 0.0:
        variance = 1.0 / (1.0 / variance + zz)
        out[27] = offset + variance * left
        out[28] = variance
    for k in range(m):
        for i in range(k):
            a = low[k, i]
            for n in range(24):
                g[k, n] -= a * g[i, n]
        a = 1.0 / low[k, k]
        for n in range(24):
            g[k, n] *= a
    for n in range(24):
        total = 0.0
        shift = 0.0
        for k in range(m):
            total += g[k, n] * y[k]
            shift += g[k, n] * z[k]
        out[n] = total
        lag[n] += shift
    for k in range(m):
        for i in range(24):
            a = g[k, i]
            for n in range(24):
                p[i, n] -= a * g[k, n]
    # gain = g' low^-1, backwards.
    for k in range(m - 1, -1, -1):
        for n in range(24):
            total = g[k, n]
            for i in range(k + 1, m):
                total -= low[i, k] * gain[n, i]
            gain[n, k] = total / low[k, k]
