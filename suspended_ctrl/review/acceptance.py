"""Was the run good enough: each criterion against its figure."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Protocol, runtime_checkable

RUN_COMPLETED = 'run_completed'


@runtime_checkable
class LowerBound(Protocol):
    """A mission file's lower bound."""

    at_least: float


Bound = float | Mapping[str, float] | LowerBound


@dataclass(frozen=True)
class Criterion:
    """
    One criterion and how it came out.

    Attributes
    ----------
    key : str
        Of metrics.json, parts joined by dots, or ``run_completed``.
    bound : float or None
        None for ``run_completed``.
    at_least : bool
        Whether the bound is a lower one.
    value : float or None
        None where the run has no such figure: then the criterion fails.
    passed : bool
    reason : str
        In words, with value and bound.

    """

    key: str
    bound: float | None
    at_least: bool
    value: float | None
    passed: bool
    reason: str


def figure(metrics: Mapping[str, Any], key: str) -> float | None:
    """Look up the number at a dotted key; None where there is none."""
    value: Any = metrics
    for part in key.split('.'):
        if not isinstance(value, Mapping) or part not in value:
            return None
        value = value[part]
    if isinstance(value, bool) or not isinstance(value, int | float):
        return None
    return value


def judged(metrics: Mapping[str, Any], criteria: Mapping[str, Bound],
           trouble: str | None) -> list[Criterion]:
    """
    Hold a run to its criteria.

    Parameters
    ----------
    metrics : mapping
        Figures as in metrics.json.
    criteria : mapping of str to bound
        A number is an upper bound; ``{'at_least': x}``, or anything with ``at_least``, is a
        lower one.
    trouble : str or None
        Why the run did not complete.

    Returns
    -------
    list of Criterion
        First whether the run completed, then the criteria in their order.

    """
    out = [Criterion(RUN_COMPLETED, None, False, None, trouble is None,
                     trouble or 'the mission ran to the end of its path')]
    for key, bound in criteria.items():
        limit, lower = _limit(bound)
        value = figure(metrics, key)
        sign, broken = ('>=', 'below') if lower else ('<=', 'above')
        if value is None:
            out.append(Criterion(key, limit, lower, None, False,
                                 f'{key}: no figure, {sign} {limit:g} wanted'))
            continue
        passed = value >= limit if lower else value <= limit
        text = (f'{key}: {value:.6g} {sign} {limit:g}' if passed
                else f'{key}: {value:.6g} is {broken} {limit:g}')
        out.append(Criterion(key, limit, lower, value, passed, text))
    return out


def _limit(bound: Bound) -> tuple[float, bool]:
    if isinstance(bound, int | float):
        return float(bound), False
    if isinstance(bound, Mapping):
        return float(bound['at_least']), True
    return float(bound.at_least), True
