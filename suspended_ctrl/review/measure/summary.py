"""Single figures out of series; None where there is nothing to say."""

import numpy as np

from suspended_ctrl.rig.frozen import Array

Section = dict[str, float | int | None]


def finite(value: float) -> float | None:
    """Return the value, or None where it is no number: JSON has no nan."""
    return float(value) if np.isfinite(value) else None


def largest(series: Array) -> float | None:
    """Greatest value."""
    return finite(series.max()) if len(series) else None


def smallest(series: Array) -> float | None:
    """Least value."""
    return finite(series.min()) if len(series) else None


def root_mean_square(series: Array) -> float | None:
    """Square root of the mean square."""
    return finite(np.sqrt(np.mean(series ** 2))) if len(series) else None


def quantile(series: Array, share: float) -> float | None:
    """Value that ``share`` of the series does not pass, linear between neighbours."""
    return finite(np.quantile(series, share)) if len(series) else None


def integral(time_s: Array, rate: Array, on: np.ndarray) -> float | None:
    """
    Integral of a rate over time, by trapezia between neighbours that both count.

    Parameters
    ----------
    time_s, rate : ndarray, shape (n,)
        Rising, and the rate then.
    on : ndarray of bool, shape (n,)
        Which samples count.

    Returns
    -------
    float or None
        None where no two neighbours count.

    """
    both = on[1:] & on[:-1]
    if not both.any():
        return None
    pieces = 0.5 * (rate[1:] + rate[:-1]) * np.diff(time_s)
    return finite(pieces[both].sum())
