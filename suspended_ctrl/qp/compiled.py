"""A cvxpy problem compiled for run time."""

from collections.abc import Mapping
import math
from typing import Any

import cvxpy as cp
import daqp
import numpy as np
from scipy import sparse

from suspended_ctrl.qp.canonical import Affine, canonical
from suspended_ctrl.qp.errors import ParameterError
from suspended_ctrl.qp.kernels import (
    condense_linear,
    condense_quadratic,
    crossed,
    evaluate,
    residuals,
    unusable,
)
from suspended_ctrl.qp.reduced import Reduced, reduced
from suspended_ctrl.qp.solution import QpData, Solution, Status
from suspended_ctrl.rig.frozen import Array

# Point, objective, exit flag, details; None where the solver did not take the problem.
_Answer = tuple[Array, float, int, dict[str, Any]] | None

_STATUS = {1: Status.OPTIMAL, 2: Status.OPTIMAL, -1: Status.INFEASIBLE, -3: Status.UNBOUNDED,
           -4: Status.ITERATION_LIMIT, -6: Status.INFEASIBLE}
# DAQP's constraint marks: inequality, equality (held active, never dropped).
_INEQUALITY, _EQUALITY = 0, 5
# Feasibility to which DAQP works, on rows scaled to unit length; an answer is called optimal below
# the second, which leaves three decades for the scaling back.
_PRIMAL_TOLERANCE = 1e-10
_ACCEPTED = 1e-7
_ITERATIONS_PER_ROW = 20


class _Buffer:
    """The blocks of the problem in one flat array, of which only varying entries are rewritten."""

    def __init__(self, blocks: dict[str, Affine]) -> None:
        self.flat = np.concatenate([b.constant.reshape(-1) for b in blocks.values()])
        slope = sparse.csr_array(sparse.vstack([b.slope for b in blocks.values()]))
        slope.sum_duplicates()
        self.entry = np.flatnonzero(np.diff(slope.indptr)).astype(np.int64)
        part = slope[self.entry]
        self.start = part.indptr.astype(np.int64)
        self.column = part.indices.astype(np.int64)
        self.slope = np.ascontiguousarray(part.data, dtype=float)
        self.constant = self.flat[self.entry].copy()
        self.view: dict[str, Array] = {}
        self.varies: dict[str, bool] = {}
        at = 0
        for name, block in blocks.items():
            size = block.constant.size
            self.view[name] = self.flat[at:at + size].reshape(block.constant.shape)
            self.varies[name] = bool(block.varies.any())
            at += size

    def fill(self, theta: Array) -> None:
        evaluate(theta, self.entry, self.start, self.column, self.slope, self.constant, self.flat)


class CompiledQp:
    """
    A parametrised quadratic programme written in cvxpy, solved by DAQP without cvxpy.

    Parameters
    ----------
    problem : cvxpy.Problem
        Convex, quadratic objective, linear constraints, parameters by the rules of DPP. Compiling
        costs about a millisecond a parameter entry. Values that parameters have now are the
        values they start with.

    Attributes
    ----------
    parameters, variables : dict of str to tuple
        Shapes by name.
    size : tuple of int
        Variables and general rows that the solver sees.

    Raises
    ------
    NotQpError, NotDppError, ParameterError
        If the problem cannot be compiled.

    """

    def __init__(self, problem: cp.Problem) -> None:
        source = canonical(problem)
        self._form: Reduced = reduced(source)
        self._slots = {}
        start = 0
        for slot in source.parameters:
            self._slots[slot.name] = (start, start + slot.index.size, slot.shape)
            start += slot.index.size
        self.parameters = {slot.name: slot.shape for slot in source.parameters}
        self.variables = {slot.name: slot.shape for slot in source.variables}
        self._theta = np.full(len(source.sign_needed), np.nan)
        for parameter in problem.parameters():
            if parameter.value is not None:
                first, last, _ = self._slots[parameter.name()]
                self._theta[first:last] = np.asarray(parameter.value, dtype=float).reshape(-1)
        self._sign_needed = source.sign_needed
        self._prepare()
        self._model: daqp.Model | None = None

    def _prepare(self) -> None:
        form = self._form
        source = form.source
        places = np.argwhere((source.quadratic.constant != 0.0) | source.quadratic.varies)
        self._row = np.ascontiguousarray(places[:, 0], dtype=np.int64)
        self._column = np.ascontiguousarray(places[:, 1], dtype=np.int64)
        flat = self._row * len(source.linear.constant) + self._column
        nonzero = Affine(source.quadratic.constant.reshape(-1)[flat],
                         source.quadratic.slope[flat])
        self._buffer = _Buffer({
            'quadratic': nonzero, 'linear': source.linear,
            'constant': Affine(source.constant.constant.reshape(1), source.constant.slope),
            'basis': form.basis, 'offset': form.offset, 'matrix': form.matrix,
            'lower': form.lower, 'upper': form.upper, 'free': form.free})
        width, rows = len(form.kept), form.matrix.constant.shape[0]
        self.size = (width, rows)
        self._quadratic = np.zeros((width, width))
        self._linear = np.zeros(width)
        varies = self._buffer.varies
        self._bends = varies['quadratic'] or varies['basis']
        self._turns = varies['matrix']
        self._condense_quadratic()
        sense = np.where(form.equality, _EQUALITY, _INEQUALITY).astype(np.int32)
        # DAQP asks for a matrix with at least one row: a row of zeros stands in.
        self._has_rows = rows > 0
        self._rows = self._buffer.view['matrix'] if rows else np.zeros((1, width))
        self._sense = sense if rows else np.append(sense, np.int32(_INEQUALITY))
        rank = np.full(len(source.linear.constant), -1)
        rank[form.kept] = np.arange(width)
        self._places = [(slot.name, rank[slot.index], slot.shape) for slot in source.variables]

    def _condense_quadratic(self) -> None:
        view = self._buffer.view
        condense_quadratic(self._row, self._column, view['quadratic'], view['basis'],
                           self._quadratic)

    def set(self, values: Mapping[str, object]) -> None:  # noqa: A003
        """
        Give parameters their values; those not named keep theirs.

        Parameters
        ----------
        values : mapping of str to array_like
            By parameter name, in the parameter's shape.

        Raises
        ------
        ParameterError
            If a name is unknown, a shape wrong, a number not finite or of the wrong sign. Then no
            parameter has changed.

        """
        theta = self._theta.copy()
        for name, value in values.items():
            slot = self._slots.get(name)
            if slot is None:
                raise ParameterError(
                    f'no parameter {name!r}: there are {", ".join(self._slots)}')
            first, last, shape = slot
            array = np.asarray(value, dtype=float)
            if array.shape != shape:
                raise ParameterError(f'parameter {name} has shape {shape}, not {array.shape}')
            theta[first:last] = array if array.ndim == 1 else array.reshape(-1)
        fault = unusable(theta, self._sign_needed)
        if fault >= 0:
            name = next(n for n, (first, last, _) in self._slots.items() if first <= fault < last)
            raise ParameterError(
                f'parameter {name} holds {theta[fault]}: it must be finite'
                + (', with the sign it is declared with' if self._sign_needed[fault] else ''))
        self._theta = theta

    def data(self) -> QpData:
        """Return the problem in numbers for the present parameters, copied."""
        constant = self._evaluate()
        view = self._buffer.view
        return QpData(self._quadratic.copy(), self._linear.copy(), constant,
                      view['matrix'].copy(), view['lower'].copy(), view['upper'].copy(),
                      self._form.equality.copy())

    def solve(self, values: Mapping[str, object] | None = None) -> Solution:
        """
        Solve for the present parameters, starting from the last solve's active set.

        Parameters
        ----------
        values : mapping of str to array_like, optional
            As for ``set``, which is called first.

        Returns
        -------
        Solution
            Anything but an optimum within tolerance has no values.

        Raises
        ------
        ParameterError
            As ``set``.

        """
        self.set(values or {})
        constant = self._evaluate()
        if self._crossed():
            return Solution(Status.INFEASIBLE, problem=self.data())
        if self._model is not None:
            solution = self._judged(self._warm(self._model), constant)
            if solution.optimal:
                return solution
        # A start from far off can mislead an active-set method; only a fresh one counts.
        self._model = None
        model, answer = self._cold()
        solution = self._judged(answer, constant)
        if solution.optimal:
            self._model = model
        return solution

    def _evaluate(self) -> float:
        buffer = self._buffer
        buffer.fill(self._theta)
        if self._bends:
            self._condense_quadratic()
        view = buffer.view
        constant: float = condense_linear(
            self._row, self._column, view['quadratic'], view['basis'], view['offset'],
            view['linear'], view['constant'][0], self._linear)
        return constant

    def _crossed(self) -> bool:
        view = self._buffer.view
        return bool(crossed(view['lower'], view['upper'], view['free'], _PRIMAL_TOLERANCE))

    def _bounds(self) -> tuple[Array, Array]:
        view = self._buffer.view
        if self._has_rows:
            return view['lower'], view['upper']
        # The row of zeros that stands in.
        return np.append(view['lower'], -1.0), np.append(view['upper'], 1.0)

    def _warm(self, model: daqp.Model) -> _Answer:
        lower, upper = self._bounds()
        if self._turns:
            flag = model.update(H=self._quadratic if self._bends else None, f=self._linear,
                                A=self._rows, bupper=upper, blower=lower)
        elif self._bends:
            flag = model.update(H=self._quadratic, f=self._linear, bupper=upper, blower=lower)
        else:
            flag = model.update(f=self._linear, bupper=upper, blower=lower)
        return model.solve() if flag >= 0 else None

    def _cold(self) -> tuple[daqp.Model, _Answer]:
        lower, upper = self._bounds()
        model = daqp.Model()
        model.settings = {'primal_tol': _PRIMAL_TOLERANCE,
                          'iter_limit': 100 + _ITERATIONS_PER_ROW * len(self._sense)}
        flag, _ = model.setup(self._quadratic, self._linear, self._rows, upper, lower,
                              self._sense.copy())
        return model, (model.solve() if flag >= 0 else None)

    def _judged(self, answer: _Answer, constant: float) -> Solution:
        if answer is None:
            return Solution(Status.FAILED, problem=self.data())
        x, _, flag, info = answer
        status = _STATUS.get(flag, Status.FAILED)
        iterations = info['iterations']
        if status is not Status.OPTIMAL:
            return Solution(status, iterations=iterations, problem=self.data())
        view = self._buffer.view
        check = residuals(self._quadratic, self._linear, view['matrix'], view['lower'],
                          view['upper'], x, info['lam'])
        primal, dual, gap, scale, value = check.tolist()
        dual /= 1.0 + scale
        gap /= 1.0 + abs(value)
        if not (primal <= _ACCEPTED and dual <= _ACCEPTED and gap <= _ACCEPTED):
            return Solution(Status.INACCURATE, {}, math.nan, primal, dual, gap, iterations,
                            self.data())
        values = {name: x[index].reshape(shape) for name, index, shape in self._places}
        return Solution(status, values, self._form.source.sign * (value + constant), primal,
                        dual, gap, iterations)
