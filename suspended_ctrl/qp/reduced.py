"""
Elimination of the variables that cvxpy adds, where an equality defines them.

cvxpy writes ``sum_squares(D x - d)`` as ``y'y`` with ``y = D x - d``. Such a y is a function of
the author's variables and is put back in: ``z = E w + e`` with E and e affine in the parameters,
so that ``P_w = E'PE``, ``q_w = E'(P e + q)``. What is defined by an inequality (the bound behind
an absolute value) stays a variable.
"""

from dataclasses import dataclass

import numpy as np
from scipy import sparse

from suspended_ctrl.qp.canonical import Affine, Canonical

NO_BOUND = 1e30


@dataclass(frozen=True, eq=False)
class Reduced:
    """
    The problem in the variables w that are left.

    Attributes
    ----------
    source : Canonical
    kept : ndarray of int, shape (nw,)
        Columns of z that are left.
    basis, offset : Affine
        E (n, nw) and e (n,).
    matrix : Affine
        General rows, (k, nw).
    lower, upper : Affine
        Bounds of the nw variables, then of the k rows, shape (nw + k,); ``NO_BOUND`` for none.
    equality : ndarray of bool, shape (nw + k,)
    free : Affine
        Sides (j,) of rows that have no variable left: they must not be negative.

    """

    source: Canonical
    kept: np.ndarray
    basis: Affine
    offset: Affine
    matrix: Affine
    lower: Affine
    upper: Affine
    equality: np.ndarray
    free: Affine


def _definitions(problem: Canonical) -> tuple[list[int], list[int]]:
    """Pick equality rows and the columns of z they define, in an order that can be substituted."""
    matrix = problem.equality_matrix
    entries = (matrix.constant != 0.0) | matrix.varies
    own = np.ones(entries.shape[1], dtype=bool)
    for slot in problem.variables:
        own[slot.index] = False
    # With a coefficient that depends on parameters in two places the product would be quadratic.
    own &= ~(problem.inequality_matrix.varies.any(axis=0))
    taken = np.zeros(entries.shape[1], dtype=bool)
    rows: list[int] = []
    columns: list[int] = []
    waiting = list(range(entries.shape[0]))
    progress = True
    while progress:
        progress = False
        for row in list(waiting):
            open_columns = np.flatnonzero(entries[row] & own & ~taken)
            chained = entries[row] & taken
            if len(open_columns) != 1 or (matrix.varies[row] & (chained | own)).any():
                continue
            rows.append(row)
            columns.append(int(open_columns[0]))
            taken[open_columns[0]] = True
            waiting.remove(row)
            progress = True
    return rows, columns


def _is_used_elsewhere(problem: Canonical, rows: list[int], column: int) -> bool:
    other = np.setdiff1d(np.arange(problem.equality_matrix.constant.shape[0]), rows)
    return bool((problem.inequality_matrix.constant[:, column] != 0.0).any()
                or (problem.equality_matrix.constant[other][:, column] != 0.0).any()
                or problem.equality_matrix.varies[other][:, column].any())


def reduced(problem: Canonical) -> Reduced:
    """
    Eliminate what can be eliminated and sort the rows for a solver with two-sided bounds.

    Parameters
    ----------
    problem : Canonical
        As it was written.

    Returns
    -------
    Reduced

    """
    rows, columns = _definitions(problem)
    varying = problem.equality_matrix.varies
    # E would multiply other rows: only a constant E keeps those affine.
    dropped = [i for i, (row, column) in enumerate(zip(rows, columns, strict=True))
               if varying[row].any() and _is_used_elsewhere(problem, rows, column)]
    if dropped:
        # Those that build on a dropped one could not be substituted any more: keep the plain ones.
        plain = [i for i in range(len(rows)) if i not in dropped
                 and not (problem.equality_matrix.constant[rows[i]][columns] != 0.0).sum() > 1]
        rows, columns = [rows[i] for i in plain], [columns[i] for i in plain]
    n = problem.linear.constant.shape[0]
    kept = np.setdiff1d(np.arange(n), columns)
    basis, offset = _substitution(problem, np.array(rows, dtype=int),
                                  np.array(columns, dtype=int), kept)
    return _sorted_rows(problem, np.array(rows, dtype=int), kept, basis, offset)


def _substitution(problem: Canonical, rows: np.ndarray, columns: np.ndarray,
                  kept: np.ndarray) -> tuple[Affine, Affine]:
    n, width = problem.linear.constant.shape[0], len(kept)
    inverse = np.linalg.inv(problem.equality_matrix.constant[np.ix_(rows, columns)])
    spread = np.zeros((n, len(rows)))
    spread[columns] = inverse
    stay = np.zeros((n, width))
    stay[kept, np.arange(width)] = 1.0
    side = problem.equality_side.take(rows).linear(sparse.csr_array(spread), (n,))
    block = problem.equality_matrix.take(rows, kept)
    blown = sparse.csr_array(sparse.kron(spread, sparse.eye_array(width)))
    turned = block.linear(sparse.csr_array(-blown), (n, width))
    return Affine(stay + turned.constant, turned.slope), side


def _through(matrix: Affine, side: Affine, kept: np.ndarray, basis: Affine,
             offset: Affine) -> tuple[Affine, Affine]:
    """Rows ``M z <= s`` as rows in w: ``M E w <= s - M e``."""
    gone = np.setdiff1d(np.arange(matrix.constant.shape[1]), kept)
    direct = matrix.take(np.arange(matrix.constant.shape[0]), kept)
    count, width = direct.constant.shape
    fixed = np.zeros_like(matrix.constant)
    fixed[:, gone] = matrix.constant[:, gone]
    if not fixed.any():
        return direct, side
    mover = sparse.csr_array(fixed)
    through = basis.linear(sparse.csr_array(sparse.kron(mover, sparse.eye_array(width))),
                           (count, width))
    shift = offset.linear(mover, (count,))
    return (Affine(direct.constant + through.constant, direct.slope + through.slope),
            Affine(side.constant - shift.constant, side.slope - shift.slope))


def _sorted_rows(problem: Canonical, defining: np.ndarray, kept: np.ndarray, basis: Affine,
                 offset: Affine) -> Reduced:
    other = np.setdiff1d(np.arange(problem.equality_matrix.constant.shape[0]), defining)
    columns = np.arange(problem.linear.constant.shape[0])
    equal, equal_side = _through(problem.equality_matrix.take(other, columns),
                                 problem.equality_side.take(other), kept, basis, offset)
    rows, side = _through(problem.inequality_matrix, problem.inequality_side, kept, basis, offset)
    width = len(kept)
    lower = _Sides(width, side.slope.shape[1], -NO_BOUND)
    upper = _Sides(width, side.slope.shape[1], NO_BOUND)
    general = _Rows(rows, side, lower, upper)
    general.sort()
    k = len(general.rows)
    matrix = _stacked(equal, rows.take(np.array(general.rows, dtype=int), np.arange(width)))
    low_side = side.take(np.array([i if i >= 0 else 0 for i in general.opposite], dtype=int))
    has_low = np.array([i >= 0 for i in general.opposite], dtype=bool)
    low = Affine(np.where(has_low, -low_side.constant, -NO_BOUND),
                 sparse.csr_array(sparse.diags_array(-has_low.astype(float)) @ low_side.slope)
                 if k else low_side.slope)
    high = side.take(np.array(general.rows, dtype=int))
    equality = np.zeros(width + len(other) + k, dtype=bool)
    equality[width:width + len(other)] = True
    return Reduced(problem, kept, basis, offset, matrix,
                   _stacked(lower.affine(), equal_side, low),
                   _stacked(upper.affine(), equal_side, high), equality,
                   side.take(np.array(general.empty, dtype=int)))


def _stacked(*parts: Affine) -> Affine:
    return Affine(np.concatenate([part.constant for part in parts]),
                  sparse.csr_array(sparse.vstack([part.slope for part in parts])))


class _Sides:
    """Bounds of single variables, filled one by one."""

    def __init__(self, width: int, parameters: int, nothing: float) -> None:
        self.constant = np.full(width, nothing)
        self.slope = sparse.lil_array((width, parameters))
        self.filled = np.zeros(width, dtype=bool)

    def put(self, column: int, constant: float, slope: sparse.csr_array) -> None:
        self.constant[column] = constant
        self.slope[[column], :] = slope
        self.filled[column] = True

    def affine(self) -> Affine:
        return Affine(self.constant, sparse.csr_array(self.slope))


class _Rows:
    """Inequality rows sorted into bounds, two-sided, one-sided, and those without variables."""

    def __init__(self, matrix: Affine, side: Affine, lower: _Sides, upper: _Sides) -> None:
        self.matrix = matrix
        self.side = side
        self.lower = lower
        self.upper = upper
        self.rows: list[int] = []
        self.opposite: list[int] = []
        self.empty: list[int] = []

    def sort(self) -> None:
        constant, varies = self.matrix.constant, self.matrix.varies
        seen: dict[bytes, int] = {}
        for row in range(len(constant)):
            if self._unbounded(row):
                continue
            places = np.flatnonzero((constant[row] != 0.0) | varies[row])
            fixed = not varies[row].any()
            if len(places) == 0:
                self.empty.append(row)
            elif fixed and len(places) == 1 and self._bound(row, int(places[0])):
                pass
            else:
                mirror = seen.pop((-constant[row] + 0.0).tobytes(), None) if fixed else None
                if mirror is not None:
                    self.opposite[mirror] = row
                    continue
                if fixed:
                    seen[(constant[row] + 0.0).tobytes()] = len(self.rows)
                self.rows.append(row)
                self.opposite.append(-1)

    def _unbounded(self, row: int) -> bool:
        return bool(self.side.constant[row] >= NO_BOUND
                    and not self.side.slope[[row], :].count_nonzero())

    def _bound(self, row: int, column: int) -> bool:
        coefficient = self.matrix.constant[row, column]
        sides = self.upper if coefficient > 0.0 else self.lower
        if sides.filled[column]:
            return False
        sides.put(column, self.side.constant[row] / coefficient,
                  self.side.slope[[row], :] / coefficient)
        return True
