"""Plans of the carrier: what is asked for, the planner that answers, how a plan is followed."""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.allocation.axis_course import axis_course
from suspended_ctrl.allocation.carrier_trail import SHARE
from suspended_ctrl.allocation.horizon_problem import (
    BLOCKS_S,
    build_horizon_problem,
    horizon_maps,
    HorizonMaps,
)
from suspended_ctrl.allocation.wanted_anchor import wanted_anchor, wanted_height
from suspended_ctrl.physics.values import CarrierPlan
from suspended_ctrl.qp import CompiledQp
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig

PERIOD_S = 0.1
HORIZON_S = frozen(np.cumsum(BLOCKS_S))
_TIME_S = frozen(np.concatenate(([0.0], HORIZON_S)))
# Solves a plan: one, and one that knows how the axis' limits bend its lag.
_PASSES = 2
# Room left at the ends of travel for what the solver and the readings round.
_TRAVEL_ROOM_M = 1e-3


@dataclass(frozen=True, eq=False, slots=True)
class PlanRequest:
    """
    Everything a plan depends on, to be solved here or in another process.

    Attributes
    ----------
    effect_s : float
        When the plan takes effect: one period after the state it starts from.
    axis_m, axis_speed_m_s, setpoint_m, setpoint_speed_m_s : ndarray, shape (k,)
        Expected then.
    needed : ndarray, shape (h, 6)
        Hook (map, m) and force (map, N) that the reference asks for, ``HORIZON_S`` after.

    """

    effect_s: float
    axis_m: Array
    axis_speed_m_s: Array
    setpoint_m: Array
    setpoint_speed_m_s: Array
    needed: Array


@dataclass(frozen=True, eq=False, slots=True)
class SetpointPlan(CarrierPlan):
    """
    A plan with the setpoints that lead to it; ``stamp_s`` is when it takes effect.

    Attributes
    ----------
    setpoint_m, setpoint_speed_m_s : ndarray, shape (h + 1, k)
        At ``time_s``, the start included; acceleration is constant between.
    failure : str or None
        Why the plan is only a way to rest; None when planned.

    """

    setpoint_m: Array
    setpoint_speed_m_s: Array
    failure: str | None = None

    def setpoint_at(self, t: float) -> tuple[Array, Array]:
        """Setpoint and its speed at host time ``t``, shapes (k,); at rest beyond the end."""
        ahead = t - self.stamp_s
        time = self.time_s
        if ahead >= time[-1]:
            return self.setpoint_m[-1], np.zeros(self.setpoint_m.shape[1])
        k = max(int(np.searchsorted(time, ahead, side='right')) - 1, 0)
        since = max(ahead - time[k], 0.0)
        speed = self.setpoint_speed_m_s[k]
        acceleration = (self.setpoint_speed_m_s[k + 1] - speed) / (time[k + 1] - time[k])
        return (self.setpoint_m[k] + since * speed + 0.5 * since * since * acceleration,
                speed + since * acceleration)


class CarrierPlanner:
    """
    Solves plan requests for one rig; holds nothing else but the last active sets.

    Parameters
    ----------
    rig : Rig

    """

    def __init__(self, rig: Rig) -> None:
        self._carrier = rig.carrier
        self._tether = rig.tether
        self._maps: dict[float, HorizonMaps] = {}
        self._problems: list[CompiledQp] = []
        for time_constant in rig.carrier.time_constant_s.tolist():
            if time_constant not in self._maps:
                self._maps[time_constant] = horizon_maps(time_constant)
            self._problems.append(CompiledQp(build_horizon_problem(self._maps[time_constant])))

    def solve(self, request: PlanRequest) -> SetpointPlan:
        """
        Plan all axes.

        Parameters
        ----------
        request : PlanRequest
            Where the axes are, and where they are wanted.

        Returns
        -------
        SetpointPlan
            Where a problem has no solution, its axis comes to rest as fast as it may, and
            ``failure`` says so.

        """
        carrier, tether = self._carrier, self._tether
        pull = (tether.rest_length_m, tether.stiffness_n_per_m, tether.slack_margin_n)
        wanted = wanted_anchor(request.needed, *pull)
        anchor = np.tile(carrier.anchor_m, (len(HORIZON_S), 1))
        columns: list[Array] = []
        failure = None
        # The hoist comes last: how high it should be depends on where the others get to.
        for axis, direction in enumerate(carrier.direction_map):
            if carrier.axes[axis] == 'hoist':
                wanted[:, 2] = wanted_height(request.needed, anchor, *pull)
            reading = (wanted - carrier.anchor_m) @ direction - carrier.zero_offset_m[axis]
            column, fault = self._planned(request, axis, reading)
            anchor += np.outer(column[0, 1:] + carrier.zero_offset_m[axis], direction)
            columns.append(column)
            failure = failure or fault
        stacked = np.stack(columns, axis=-1)
        return SetpointPlan(request.effect_s, _TIME_S, frozen(stacked[0]), frozen(stacked[1]),
                            frozen(stacked[2]), frozen(stacked[3]), failure)

    def _planned(self, request: PlanRequest, axis: int,
                 wanted: Array) -> tuple[Array, str | None]:
        """Axis, its speed, setpoint, its speed, at start and block ends, shape (4, h + 1)."""
        carrier = self._carrier
        time_constant = float(carrier.time_constant_s[axis])
        maps = self._maps[time_constant]
        most = SHARE * carrier.acceleration_max_m_s2[axis]
        start = np.array([request.axis_m[axis], request.setpoint_m[axis],
                          request.setpoint_speed_m_s[axis]])
        limits = {
            'start': start, 'speed': SHARE * carrier.speed_max_m_s[axis],
            'travel': [carrier.min_m[axis] + _TRAVEL_ROOM_M, carrier.max_m[axis] - _TRAVEL_ROOM_M],
            'acceleration_most': most}
        course = setpoint = speed = np.zeros(0)
        shift = np.zeros(len(BLOCKS_S))
        failure = None
        for _ in range(_PASSES):
            solution = self._problems[axis].solve(
                {'wanted': wanted - shift, **limits})
            if solution.optimal:
                acceleration = solution['acceleration']
            else:
                acceleration = _braking(start[2], most)
                failure = f'{carrier.axes[axis]}: {solution.status.value}'
            setpoint = np.append(start[1], maps.setpoint_from_start @ start
                                 + maps.setpoint_from_acceleration @ acceleration)
            speed = np.append(start[2], maps.speed_from_start @ start
                              + maps.speed_from_acceleration @ acceleration)
            course = axis_course(start[0], float(request.axis_speed_m_s[axis]), _TIME_S, setpoint,
                                 speed, time_constant, carrier.speed_max_m_s[axis],
                                 carrier.acceleration_max_m_s2[axis])
            # Inside its own limits an axis lags by more than its time constant: the next pass
            # allows for it.
            shift = course[0, 1:] - (maps.axis_from_start @ start
                                     + maps.axis_from_acceleration @ acceleration)
        return np.stack((course[0], course[1], setpoint, speed)), failure


def _braking(speed: float, most: float) -> Array:
    """Accelerations of the blocks that bring a speed to rest, shape (h,)."""
    out = np.zeros(len(BLOCKS_S))
    for k, span in enumerate(BLOCKS_S):
        out[k] = np.clip(-speed / span, -most, most)
        speed += out[k] * span
    return out
