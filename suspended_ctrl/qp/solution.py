"""The answer of a compiled problem, with what tells how good it is."""

from dataclasses import dataclass, field
from enum import Enum

from suspended_ctrl.rig.frozen import Array


class Status(Enum):
    """How a solve ended."""

    OPTIMAL = 'optimal'
    INFEASIBLE = 'infeasible'
    UNBOUNDED = 'unbounded'
    ITERATION_LIMIT = 'iteration limit'
    INACCURATE = 'inaccurate'
    FAILED = 'failed'


@dataclass(frozen=True, eq=False, slots=True)
class QpData:
    """
    One problem in numbers: ``min 1/2 x'Px + q'x + r``, ``lower <= (x, A x) <= upper``.

    Attributes
    ----------
    quadratic, linear : ndarray
        P (n, n), q (n,).
    constant : float
        r.
    matrix : ndarray, shape (k, n)
        A.
    lower, upper : ndarray, shape (n + k,)
        1e30 and more stand for no bound.
    equality : ndarray of bool, shape (n + k,)

    """

    quadratic: Array
    linear: Array
    constant: float
    matrix: Array
    lower: Array
    upper: Array
    equality: Array


@dataclass(frozen=True, eq=False, slots=True)
class Solution:
    """
    What a solve gave.

    Attributes
    ----------
    status : Status
    values : dict of str to ndarray
        The author's variables by name; empty unless optimal.
    objective : float
        As the author wrote it (made small or great); nan unless optimal.
    primal_residual : float
        Worst violation of a bound or row.
    dual_residual : float
        Worst entry of the Lagrangian's gradient over one plus its greatest term.
    gap : float
        Primal less dual objective over one plus the objective's size.
    iterations : int
    problem : QpData or None
        The problem that failed; None when optimal.

    """

    status: Status
    values: dict[str, Array] = field(default_factory=dict)
    objective: float = float('nan')
    primal_residual: float = float('inf')
    dual_residual: float = float('inf')
    gap: float = float('inf')
    iterations: int = 0
    problem: QpData | None = None

    @property
    def optimal(self) -> bool:
        """Whether the values may be used."""
        return self.status is Status.OPTIMAL

    def __getitem__(self, name: str) -> Array:
        """Value of one of the author's variables."""
        return self.values[name]
