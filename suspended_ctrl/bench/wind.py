"""
Wind with turbulence: the Dryden form of MIL-F-8785C (1980) for low altitude.

The platform hangs in air that drifts past with the mean wind, so that wind takes the place of the
airspeed in the standard's filters. The standard counts in feet.
"""

from dataclasses import dataclass
import math

import numpy as np
from scipy.linalg import expm, solve_continuous_lyapunov

from suspended_ctrl.physics.kernel import kernel, MATRIX, OUT_MATRIX, OUT_VECTOR
from suspended_ctrl.rig.frozen import Array

FOOT_M = 0.3048
# The range of heights of the formulas for scale and intensity.
_HEIGHT_MIN_FT, _HEIGHT_MAX_FT = 10.0, 1000.0
# Logarithmic profile of the mean wind, the same standard, section 3.7.3 (from memory), its
# roughness length for terminal flight and the least height of its formula.
_ROUGHNESS_FT = 0.15
_PROFILE_MIN_FT = 3.0
_REFERENCE_FT = 20.0
_BLOCK = 1024


@dataclass(frozen=True)
class Dryden:
    """
    Turbulence in level directions.

    Attributes
    ----------
    mean_m_s : float
        Mean wind.
    length_m : float
        Scale, along and across the wind.
    sigma_m_s : float
        Intensity, along and across the wind.

    """

    mean_m_s: float
    length_m: float
    sigma_m_s: float


def low_altitude(height_m: float, wind_m_s: float) -> Dryden:
    """
    Turbulence close to the ground, MIL-F-8785C section 3.7.3 and 3.7.2 (numbers from memory).

    Parameters
    ----------
    height_m : float
        Above the ground; below 10 feet scale and intensity are those at 10 feet.
    wind_m_s : float
        Mean wind at 20 feet.

    Returns
    -------
    Dryden

    """
    feet = height_m / FOOT_M
    inside = min(max(feet, _HEIGHT_MIN_FT), _HEIGHT_MAX_FT)
    shape = 0.177 + 0.000823 * inside
    profile = (math.log(max(feet, _PROFILE_MIN_FT) / _ROUGHNESS_FT)
               / math.log(_REFERENCE_FT / _ROUGHNESS_FT))
    return Dryden(mean_m_s=wind_m_s * profile, length_m=inside / shape ** 1.2 * FOOT_M,
                  sigma_m_s=0.1 * wind_m_s / shape ** 0.4)


@kernel(OUT_MATRIX(OUT_VECTOR, MATRIX, MATRIX, MATRIX, MATRIX))
def _filtered(state: Array, transition: Array, drive: Array, output: Array,
              noise: Array) -> Array:
    """Run a linear filter over rows of white noise; ``state`` is left where it ends."""
    rows, order = noise.shape
    out = np.zeros((rows, output.shape[0]))
    nearer = np.empty(order)
    for r in range(rows):
        for i in range(order):
            nearer[i] = 0.0
            for j in range(order):
                nearer[i] += transition[i, j] * state[j] + drive[i, j] * noise[r, j]
        for i in range(order):
            state[i] = nearer[i]
        for i in range(output.shape[0]):
            for j in range(order):
                out[r, i] += output[i, j] * state[j]
    return out


def _driving_variance(flow: Array, step_s: float) -> Array:
    """
    Variance that unit white noise into the first two states brings about in one step.

    By Van Loan's matrix exponential (IEEE TAC 23, 1978); as a difference of steady variances the
    second state of a row would lose all its digits, its share going with the cube of the step.
    """
    order = len(flow)
    block = np.zeros((2 * order, 2 * order))
    block[:order, :order] = -flow
    block[:order, order:] = np.diag((1.0, 1.0, 0.0))
    block[order:, order:] = flow.T
    grown = expm(block * step_s)
    variance: Array = grown[order:, order:].T @ grown[:order, order:]
    return 0.5 * (variance + variance.T)


class Wind:
    """
    Wind at the platform, a value a plant step.

    Along the wind first-order, across it second-order: white noise through the standard's forming
    filters, discretised exactly and started in their steady state.

    Parameters
    ----------
    dryden : Dryden
    step_s : float
    rng : Generator
        Also draws the direction that the wind blows to.

    """

    def __init__(self, dryden: Dryden, step_s: float, rng: np.random.Generator) -> None:
        heading = rng.uniform(-math.pi, math.pi)
        along = np.array((math.cos(heading), math.sin(heading)))
        self.along_map = along
        self._turn = np.column_stack((along, (-along[1], along[0])))
        self._mean = dryden.mean_m_s * along
        self._rng = rng
        rate = dryden.mean_m_s / dryden.length_m
        # One state for the wind along, two in a row for the wind across; the latter's output is
        # (1 + sqrt(3) T s) / (1 + T s)^2 of white noise.
        flow = rate * np.array(((-1.0, 0.0, 0.0), (0.0, -1.0, 0.0), (0.0, 1.0, -1.0)))
        steady = solve_continuous_lyapunov(flow, -np.diag((1.0, 1.0, 0.0)))
        root = math.sqrt(3.0)
        self._output = np.array(((1.0, 0.0, 0.0), (0.0, root, 1.0 - root)))
        variance = np.diag(self._output @ steady @ self._output.T)
        self._output *= dryden.sigma_m_s / np.sqrt(variance)[:, None]
        self._transition = np.ascontiguousarray(expm(flow * step_s))
        self._drive = np.ascontiguousarray(np.linalg.cholesky(_driving_variance(flow, step_s)))
        self._state = np.linalg.cholesky(steady) @ rng.standard_normal(3)
        self._rows: Array = np.empty((0, 2))
        self._next = 0

    def velocity_map(self) -> Array:
        """Return x and y of the wind in map for the next step, shape (2,), m/s."""
        i = self._next
        if i >= len(self._rows):
            turbulence = _filtered(self._state, self._transition, self._drive, self._output,
                                   self._rng.standard_normal((_BLOCK, 3)))
            self._rows = turbulence @ self._turn.T + self._mean
            i = 0
        self._next = i + 1
        row: Array = self._rows[i]
        return row
