"""Quadratic programmes written in cvxpy and compiled for run time."""

from suspended_ctrl.qp.compiled import CompiledQp
from suspended_ctrl.qp.errors import NotDppError, NotQpError, ParameterError, QpError
from suspended_ctrl.qp.solution import QpData, Solution, Status

__all__ = ['CompiledQp', 'NotDppError', 'NotQpError', 'ParameterError', 'QpData', 'QpError',
           'Solution', 'Status']
