"""What is evaluated at every solve, compiled: parameters into matrices, and residuals."""

from numba import types
import numpy as np
from numpy.typing import NDArray

from suspended_ctrl.physics.kernel import (
    INTEGER,
    kernel,
    MATRIX,
    OUT_MATRIX,
    OUT_VECTOR,
    REAL,
    TRUTH,
    VECTOR,
)
from suspended_ctrl.rig.frozen import Array

Index = NDArray[np.int64]
INDEX = types.Array(types.int64, 1, 'C', readonly=True)


@kernel(types.void(VECTOR, INDEX, INDEX, INDEX, VECTOR, VECTOR, OUT_VECTOR))
def evaluate(theta: Array, entry: Index, start: Index, column: Index, slope: Array,
             constant: Array, out: Array) -> None:
    """
    Fill the entries of ``out`` that depend on parameters.

    Parameters
    ----------
    theta : ndarray, shape (m,)
        Values of all parameters.
    entry : ndarray of int, shape (v,)
        Places in ``out`` that vary.
    start, column, slope : ndarray
        Compressed rows of their slopes: (v + 1,), (nnz,), (nnz,).
    constant : ndarray, shape (v,)
        What does not depend on them.
    out : ndarray, shape (total,)
        Changed in place.

    """
    for i in range(entry.shape[0]):
        value = constant[i]
        for k in range(start[i], start[i + 1]):
            value += slope[k] * theta[column[k]]
        out[entry[i]] = value


@kernel(types.void(INDEX, INDEX, VECTOR, MATRIX, OUT_MATRIX))
def condense_quadratic(row: Index, column: Index, value: Array, basis: Array,
                       out: Array) -> None:
    """Fill ``out`` (nw, nw) with E'PE, E the ``basis``, P by its nonzero places and values."""
    width = basis.shape[1]
    for a in range(width):
        for b in range(width):
            out[a, b] = 0.0
    for k in range(row.shape[0]):
        i = row[k]
        j = column[k]
        for a in range(width):
            left = value[k] * basis[i, a]
            if left == 0.0:
                continue
            for b in range(width):
                out[a, b] += left * basis[j, b]


@kernel(REAL(INDEX, INDEX, VECTOR, MATRIX, VECTOR, VECTOR, REAL, OUT_VECTOR))
def condense_linear(row: Index, column: Index, value: Array, basis: Array, offset: Array,
                    linear: Array, constant: float, out: Array) -> float:
    """
    Fill ``out`` (nw,) with E'(P e + q) and return 1/2 e'Pe + q'e + r.

    E is ``basis``, e ``offset``, q ``linear``, r ``constant``; P by nonzero places and values.
    """
    count, width = basis.shape
    pushed = linear.copy()
    half = constant
    for i in range(count):
        half += linear[i] * offset[i]
    for k in range(row.shape[0]):
        part = value[k] * offset[column[k]]
        pushed[row[k]] += part
        half += 0.5 * part * offset[row[k]]
    for a in range(width):
        out[a] = 0.0
    for i in range(count):
        if pushed[i] != 0.0:
            for a in range(width):
                out[a] += pushed[i] * basis[i, a]
    return half


@kernel(INTEGER(VECTOR, VECTOR))
def unusable(theta: Array, sign_needed: Array) -> int:
    """First entry that is not finite or not of the sign it needs, -1 if there is none."""
    for i in range(theta.shape[0]):
        if not np.isfinite(theta[i]) or theta[i] * sign_needed[i] < 0.0:
            return i
    return -1


@kernel(TRUTH(VECTOR, VECTOR, VECTOR, REAL))
def crossed(lower: Array, upper: Array, free: Array, tolerance: float) -> bool:
    """Whether a lower bound lies above its upper, or a row without variables cannot hold."""
    for i in range(lower.shape[0]):
        if lower[i] > upper[i] + tolerance:
            return True
    for i in range(free.shape[0]):
        if free[i] < -tolerance:
            return True
    return False


@kernel(OUT_VECTOR(MATRIX, VECTOR, MATRIX, VECTOR, VECTOR, VECTOR, VECTOR))
def residuals(quadratic: Array, linear: Array, matrix: Array, lower: Array, upper: Array,
              x: Array, dual: Array) -> Array:
    """
    How far an answer is from the optimality conditions.

    Parameters
    ----------
    quadratic, linear, matrix : ndarray
        P (n, n), q (n,), A (k, n).
    lower, upper : ndarray, shape (n + k,)
        Of x, then of A x.
    x : ndarray, shape (n,)
        The answer.
    dual : ndarray, shape (n + k,)
        Positive at upper bounds, negative at lower.

    Returns
    -------
    ndarray, shape (5,)
        Worst violation of a bound; worst entry of ``P x + q + [I A]' dual``; gap between primal
        and dual objective; the scale of the second (greatest term in it); ``1/2 x'Px + q'x``.

    """
    n = x.shape[0]
    k = matrix.shape[0]
    primal = 0.0
    gradient = np.zeros(n)
    scale = 0.0
    curved = 0.0
    sloped = 0.0
    for i in range(n):
        total = 0.0
        for j in range(n):
            total += quadratic[i, j] * x[j]
        curved += total * x[i]
        sloped += linear[i] * x[i]
        scale = max(scale, abs(total), abs(linear[i]), abs(dual[i]))
        gradient[i] = total + linear[i] + dual[i]
        primal = max(primal, lower[i] - x[i], x[i] - upper[i])
    for r in range(k):
        total = 0.0
        for j in range(n):
            total += matrix[r, j] * x[j]
            part = matrix[r, j] * dual[n + r]
            gradient[j] += part
            scale = max(scale, abs(part))
        primal = max(primal, lower[n + r] - total, total - upper[n + r])
    supported = 0.0
    for r in range(n + k):
        if dual[r] > 0.0:
            supported += dual[r] * upper[r]
        elif dual[r] < 0.0:
            supported += dual[r] * lower[r]
    out = np.empty(5)
    out[0] = primal
    out[1] = np.abs(gradient).max() if n else 0.0
    out[2] = abs(curved + sloped + supported)
    out[3] = scale
    out[4] = 0.5 * curved + sloped
    return out
