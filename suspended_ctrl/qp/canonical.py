"""
A cvxpy problem as matrices that are affine in its parameters.

cvxpy turns a problem into ``min 1/2 z'Pz + q'z + r`` with ``A z = b`` and ``F z <= g``. For a
problem that keeps the rules of disciplined parametrised programming every entry of these is affine
in the parameters (Agrawal et al. 2019, "Differentiable convex optimization layers", section 4), so
one evaluation with all parameters zero and one per parameter entry give the whole map. Only
documented calls are used: ``get_problem_data``, ``unpack_results`` and a chain's ``invert``.
"""

from dataclasses import dataclass
from typing import Any

import cvxpy as cp
import numpy as np
from scipy import sparse

from suspended_ctrl.qp.errors import NotDppError, NotQpError, ParameterError
from suspended_ctrl.rig.frozen import Array

_SOLVER = 'DAQP'
# Two evaluations of the same entry through cvxpy's sparse products differ by rounding only.
_ROUNDING = 1e-9
_SIGNS = ('nonneg', 'pos', 'nonpos', 'neg')


@dataclass(frozen=True, eq=False)
class Slot:
    """A parameter's or a variable's place: name, shape, and indices of its entries, C order."""

    name: str
    shape: tuple[int, ...]
    index: np.ndarray


@dataclass(frozen=True, eq=False)
class Affine:
    """
    An array whose entries are affine in the parameters.

    Attributes
    ----------
    constant : ndarray
        Value with all parameters zero.
    slope : scipy.sparse.csr_array, shape (constant.size, m)
        Change of each entry, C order, for a unit of each parameter entry.

    """

    constant: Array
    slope: sparse.csr_array

    @property
    def varies(self) -> np.ndarray:
        """Which entries depend on a parameter, shape of the constant."""
        return np.asarray(np.diff(self.slope.indptr) > 0).reshape(self.constant.shape)

    def at(self, theta: Array) -> Array:
        """Value for one parameter vector, shape (m,)."""
        value: Array = self.constant + (self.slope @ theta).reshape(self.constant.shape)
        return value

    def take(self, rows: np.ndarray, columns: np.ndarray | None = None) -> 'Affine':
        """Part of a vector, or of a matrix where ``columns`` is given."""
        places = np.arange(self.constant.size).reshape(self.constant.shape)
        places = places[rows] if columns is None else places[np.ix_(rows, columns)]
        return Affine(self.constant.reshape(-1)[places], self.slope[places.reshape(-1)])

    def linear(self, matrix: sparse.csr_array, shape: tuple[int, ...]) -> 'Affine':
        """Entries recombined by a constant ``matrix`` on the flattened array."""
        slope = sparse.csr_array(matrix @ self.slope)
        slope.eliminate_zeros()
        return Affine((matrix @ self.constant.reshape(-1)).reshape(shape), slope)


@dataclass(frozen=True, eq=False)
class Canonical:
    """
    The problem in cvxpy's own variables z, objective always to be made small.

    Attributes
    ----------
    quadratic, linear, constant : Affine
        P (n, n), q (n,), r ().
    equality_matrix, equality_side : Affine
        A (p, n), b (p,).
    inequality_matrix, inequality_side : Affine
        F (s, n), g (s,).
    parameters, variables : tuple of Slot
        Variables' indices are columns of z; every other column is cvxpy's own.
    sign : float
        -1 where the author maximises, so that the author's objective is sign times ours.
    sign_needed : ndarray, shape (m,)
        +1 or -1 where the author declared a parameter's sign, else 0.

    """

    quadratic: Affine
    linear: Affine
    constant: Affine
    equality_matrix: Affine
    equality_side: Affine
    inequality_matrix: Affine
    inequality_side: Affine
    parameters: tuple[Slot, ...]
    variables: tuple[Slot, ...]
    sign: float
    sign_needed: Array


def _checked(problem: cp.Problem) -> None:
    if problem.is_mixed_integer():
        raise NotQpError('the problem has integer variables')
    if not problem.is_dcp():
        raise NotQpError("the problem is not convex by cvxpy's rules")
    if not problem.is_dcp(dpp=True):
        raise NotDppError("the problem does not keep cvxpy's rules for parameters (DPP)")
    if not problem.is_qp():
        raise NotQpError('the problem has terms that no quadratic programme can hold')


def _sign_of(parameter: cp.Parameter) -> float:
    attributes = {key for key, value in parameter.attributes.items()
                  if value is not False and value is not None}
    other = attributes - set(_SIGNS)
    if other:
        raise ParameterError(
            f'parameter {parameter.name()} is declared {", ".join(sorted(other))}: '
            'only signs can be declared')
    if attributes & {'nonneg', 'pos'}:
        return 1.0
    return -1.0 if attributes else 0.0


def _slots(parameters: list[cp.Parameter]) -> tuple[Slot, ...]:
    slots: list[Slot] = []
    start = 0
    for parameter in parameters:
        if parameter.name() in {slot.name for slot in slots}:
            raise ParameterError(f'two parameters are named {parameter.name()}')
        slots.append(Slot(parameter.name(), parameter.shape,
                          np.arange(start, start + parameter.size)))
        start += parameter.size
    return tuple(slots)


def _raw(problem: cp.Problem) -> list[Array]:
    """Evaluate P, q, r, A, b, F, g at the parameters' present values, dense."""
    data, chain, inverse = problem.get_problem_data(_SOLVER)
    n = data['q'].shape[0]
    quadratic = np.zeros((n, n)) if data['P'] is None else data['P'].toarray()
    matrix, side = data['F'].toarray(), np.asarray(data['G'], dtype=float)
    for key, sense in (('lower_bounds', -1.0), ('upper_bounds', 1.0)):
        if data[key] is not None:
            limit = np.asarray(data[key], dtype=float)
            matrix = np.vstack((matrix, sense * np.eye(n)))
            side = np.concatenate((side, np.where(np.isfinite(limit), sense * limit, 1e30)))
    answer = _as_if_solved(np.zeros(n), data)
    offset = float(chain.invert(answer, inverse).opt_val)
    return [quadratic, np.asarray(data['q'], dtype=float), np.asarray(offset),
            data['A'].toarray(), np.asarray(data['b'], dtype=float), matrix, side]


def _as_if_solved(z: Array, data: dict[str, Any]) -> tuple[Array, float, int, dict[str, Any]]:
    """Build what the solver would return for the columns ``z`` and a value of zero."""
    rows = data['A'].shape[0] + data['F'].shape[0]
    info = {'solve_time': 0.0, 'setup_time': 0.0, 'iterations': 0, 'lam': np.zeros(len(z) + rows)}
    return z, 0.0, 1, info


def _variable_slots(problem: cp.Problem) -> tuple[Slot, ...]:
    data, chain, inverse = problem.get_problem_data(_SOLVER)
    n = data['q'].shape[0]
    problem.unpack_results(_as_if_solved(np.arange(1.0, n + 1.0), data), chain, inverse)
    slots = []
    for variable in problem.variables():
        place = np.asarray(variable.value, dtype=float).reshape(-1)
        index = np.rint(place).astype(np.int64) - 1
        if not np.allclose(place, index + 1.0) or index.min() < 0 or index.max() >= n:
            raise NotQpError(f'variable {variable.name()} has a form that is not supported')
        slots.append(Slot(variable.name(), variable.shape, index))
    names = [slot.name for slot in slots]
    if len(set(names)) != len(names):
        raise NotQpError('two variables have the same name')
    return tuple(slots)


def canonical(problem: cp.Problem) -> Canonical:
    """
    Extract a problem's affine maps.

    Parameters
    ----------
    problem : cvxpy.Problem
        Parameters need no values. Costs about a millisecond a parameter entry.

    Returns
    -------
    Canonical

    Raises
    ------
    NotQpError, NotDppError, ParameterError
        If the problem cannot be compiled.

    """
    _checked(problem)
    parameters = problem.parameters()
    kept = [parameter.value for parameter in parameters]
    signs = [_sign_of(parameter) for parameter in parameters]
    slots = _slots(parameters)
    try:
        probes = _probe(problem, parameters, signs)
        variables = _variable_slots(problem)
    finally:
        for parameter, value in zip(parameters, kept, strict=True):
            parameter.value = value
    needed = np.concatenate([np.full(slot.index.size, sign)
                             for slot, sign in zip(slots, signs, strict=True)] or [np.zeros(0)])
    sign = -1.0 if isinstance(problem.objective, cp.Maximize) else 1.0
    p, q, r, equal, equal_side, rows, side = probes
    r = Affine(sign * r.constant, sign * r.slope)
    return Canonical(p, q, r, equal, equal_side, rows, side, slots, variables, sign, needed)


def _probe(problem: cp.Problem, parameters: list[cp.Parameter],
           signs: list[float]) -> list[Affine]:
    for parameter in parameters:
        parameter.value = np.zeros(parameter.shape)
    base = _raw(problem)
    slopes: list[list[sparse.csr_array]] = [[] for _ in base]
    for parameter, sign in zip(parameters, signs, strict=True):
        step = -1.0 if sign < 0.0 else 1.0
        for entry in range(parameter.size):
            unit = np.zeros(parameter.size)
            unit[entry] = step
            parameter.value = unit.reshape(parameter.shape)
            for slope, value, zero in zip(slopes, _raw(problem), base, strict=True):
                slope.append(sparse.csr_array((value - zero).reshape(1, -1) * step))
        parameter.value = np.zeros(parameter.shape)
    maps = []
    for zero, slope in zip(base, slopes, strict=True):
        stacked = (sparse.vstack(slope).T if slope else sparse.csr_array((zero.size, 0)))
        maps.append(Affine(zero, sparse.csr_array(stacked)))
    _verify(problem, parameters, signs, maps)
    return maps


def _verify(problem: cp.Problem, parameters: list[cp.Parameter], signs: list[float],
            maps: list[Affine]) -> None:
    """Compare the maps with cvxpy at a point off all axes; a map that is not affine fails here."""
    if not parameters:
        return
    theta = []
    for number, (parameter, sign) in enumerate(zip(parameters, signs, strict=True)):
        # Any fixed values off the probed ones do.
        value = 0.3 + 0.7 * np.cos(np.arange(parameter.size) + number)
        value = np.abs(value) * sign if sign else value
        parameter.value = value.reshape(parameter.shape)
        theta.append(value)
    point = np.concatenate(theta)
    for affine, value in zip(maps, _raw(problem), strict=True):
        if not np.allclose(affine.at(point), value, rtol=_ROUNDING, atol=_ROUNDING):
            raise NotDppError('a parameter enters the problem otherwise than affinely')
