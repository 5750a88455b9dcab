"""The supervisor: limits and requests through the table of states to the drivers' commands."""

import numpy as np

from suspended_ctrl.physics.values import CarrierCommand, RotorCommand
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety import rows
from suspended_ctrl.safety.arrivals import Arrivals
from suspended_ctrl.safety.figures import cut_figures, limit_figures, Values
from suspended_ctrl.safety.limits import Limit, limit_table
from suspended_ctrl.safety.sequence import next_state, ROTOR_POWER
from suspended_ctrl.safety.settings import SafetySettings
from suspended_ctrl.safety.shares import Shares
from suspended_ctrl.safety.values import (
    Reply,
    SafetyEvent,
    SafetyInputs,
    SafetyOutputs,
    StateChange,
)

# Limits that need an inertial sensor for a controlled stop: without one they are cut at once.
_BLIND = frozenset((rows.POSE_STALE, rows.POSE_REJECTED, rows.ESTIMATOR_INCONSISTENT))


class SafetySupervisor:
    """
    Last in the row, knows nothing of the others' insides, and fails to zero.

    The operator's own stop (``stop``, or ``enable`` false) is a category 1 stop that ends in
    ``ready``: nothing is wrong, so nothing latches. A limit's stop ends in ``tripped`` and wants
    ``reset``, which is refused while one of its causes stands. A limit of category 2 holds; its
    ``reset`` returns to ``live``. When a stop is not at rest within ``stop_timeout_s`` the rotors
    are cut and the rig is ``tripped``.

    While stopping or holding the anchor is ramped to rest here and carrier demands do not pass:
    the platform comes to rest over an equilibrium that stands still. The way there is the
    controller's; it must not linger under the rest thresholds for ``rest_time_s`` off it.

    Required before ``ready``: every sensor of architecture's list and, since nothing could be
    controlled without them, odometry and rotor demands; estimator, controller and allocator must
    therefore run before the rig is live.

    Parameters
    ----------
    rig : Rig
    settings : SafetySettings, optional
        ``SafetySettings.for_rig(rig)`` if left out.

    Attributes
    ----------
    limits : tuple of Limit
        The table, in the order of ``SafetyOutputs.margin``.
    state : str

    """

    def __init__(self, rig: Rig, settings: SafetySettings | None = None) -> None:
        self._rig = rig
        self.settings = SafetySettings.for_rig(rig) if settings is None else settings
        self.limits: tuple[Limit, ...] = limit_table(rig, self.settings)
        self.state = 'locked'
        self._seen = Arrivals(rig, self.settings)
        self._shares = Shares(rig, self.settings)
        count = len(self.limits)
        self._since = np.full(count, np.inf)
        self._hold_off_s = frozen([limit.hold_off_s for limit in self.limits])
        self._powered_only = frozen([float(limit.powered) for limit in self.limits])
        self._broken = np.zeros(count)
        self._zero = frozen(np.zeros(rig.rotors.count))
        self._command = self._zero
        self._followed: tuple[Array, Array] | None = None
        self._t = -np.inf
        self._now_s = 0.0
        self._entered_s = 0.0
        self._rest_since_s = np.inf
        self._settled = False
        # Category under which each limit was raised since the last enable.
        self._raised: dict[int, int] = {}
        self._events: list[SafetyEvent] = []
        self._changes: list[StateChange] = []

    @property
    def refused(self) -> dict[str, int]:
        """Messages refused so far, by kind."""
        return dict(self._seen.refused)

    def step(self, t: float, inputs: SafetyInputs) -> SafetyOutputs:
        """
        Judge, decide, command.

        Parameters
        ----------
        t : float
            Monotonic time, s; a value before the last step's counts as no time passed.
        inputs : SafetyInputs
            What came since the last step.

        Returns
        -------
        SafetyOutputs

        """
        first = self._t == -np.inf
        t = t if first or t > self._t else self._t
        gap_s = 0.0 if first else t - self._t
        now_s = inputs.now_s
        jump_s = now_s - self._now_s - gap_s if self._now_s > 0.0 else 0.0
        self._t, self._now_s = t, now_s
        seen, shares = self._seen, self._shares
        seen.rotors.advance(gap_s, self._command)
        seen.anchor.advance(gap_s)
        seen.take(t, inputs, jump_s)
        shares.measure(t, gap_s, jump_s, seen, self.state, t - self._entered_s, self._settled)

        powered = self.state in ROTOR_POWER
        margin = np.empty(len(self.limits))
        worst = rows.hold_off(t, shares.used, self._since, self._hold_off_s, self._powered_only,
                              powered, self._broken, margin)
        self._events, self._changes = [], []
        if powered:
            if worst == 2:
                self._raise(t)
            if self.state != 'live':
                self._watch_rest(t)
        else:
            self._check(t, worst)
        replies: tuple[Reply, ...] = ()
        if inputs.requests:
            replies = tuple(self._answer(t, request) for request in inputs.requests)
        rotors = self._rotor_command(t)
        carrier = self._carrier_command(t, gap_s)
        failed: tuple[str, ...] = ()
        if self.state not in ROTOR_POWER and worst:
            failed = self._failed()
        return SafetyOutputs(self.state, rotors, carrier, margin, tuple(self._events),
                             tuple(self._changes), replies, failed)

    # ------------------------------------------------------------ state

    def _go(self, t: float, event: str, cause: str, values: Values = ()) -> None:
        after = next_state(self.state, event)
        if after == self.state:
            return
        self._changes.append(StateChange(t, self.state, after, cause, values))
        self.state = after
        self._entered_s = t
        self._rest_since_s = np.inf
        self._settled = False

    def _failed(self) -> tuple[str, ...]:
        return tuple(self.limits[i].name for i in np.flatnonzero(self._broken))

    def _check(self, t: float, worst: int) -> None:
        """Without rotor power: is every check green; an emergency stop latches."""
        if self._broken[rows.EMERGENCY_STOP] and self.state != 'tripped':
            self._raised = {rows.EMERGENCY_STOP: 0}
            self._events.append(SafetyEvent(t, 'emergency_stop', 0))
            self._go(t, 'emergency', 'emergency_stop')
        elif worst == 0:
            self._go(t, 'green', 'every check is green')
        elif worst == 2 and self.state == 'ready':
            self._go(t, 'not_green', ', '.join(self._failed()))

    def _raise(self, t: float) -> None:
        """With rotor power: raise what is newly broken, or broken worse."""
        new: list[tuple[int, int]] = []
        for i in np.flatnonzero(self._broken == 2.0).tolist():
            category = self._category(i, t)
            if i == rows.ROTOR_NOT_FOLLOWING and self._goes_on(t):
                continue
            if category < self._raised.get(i, 3) and (category < 2 or self.state == 'live'):
                new.append((category, i))
        new.sort()
        for k, (category, i) in enumerate(new):
            self._raised[i] = category
            values = self._figures(i)
            if k == 0 and category == 0:
                values += cut_figures(self._rig, self._seen)
            cause = self.limits[i].name
            self._events.append(SafetyEvent(t, cause, category, values))
            if k == 0:
                self._go(t, f'category_{category}', cause, values)

    def _category(self, i: int, t: float) -> int:
        """Stop category of a broken row here and now."""
        limit = self.limits[i]
        if limit.category != 1:
            return limit.category
        if limit.cut is not None and self._shares.used[i] > limit.cut:
            return 0
        blind = t - self._seen.at[rows.IMU] > self.settings.imu_gone_s
        return 0 if i in _BLIND and blind else 1

    def _goes_on(self, t: float) -> bool:
        """Whether the rig goes on without the rotor that does not follow."""
        rotors = self._seen.rotors
        if len(rotors.lost) >= self.settings.rotor_losses_tolerated:
            return False
        values = self._figures(rows.ROTOR_NOT_FOLLOWING)
        self._events.append(SafetyEvent(t, 'rotor_not_following', None, values))
        rotors.give_up(rotors.worst)
        return True

    def _watch_rest(self, t: float) -> None:
        """At rest for long enough: cut a stop, settle a hold."""
        s = self.settings
        speed, rate = self._seen.speeds()
        if not (speed < s.rest_speed_m_s and rate < s.rest_rate_rad_s):
            self._rest_since_s = np.inf
            return
        if self._rest_since_s == np.inf:
            self._rest_since_s = t
        if t - self._rest_since_s < s.rest_time_s:
            return
        self._settled = True
        if self.state == 'stopping':
            latched = [self.limits[i].name for i, k in self._raised.items() if k < 2]
            self._go(t, 'rest_latched' if latched else 'rest', latched[0] if latched else 'stop',
                     (('speed_m_s', speed), ('rate_rad_s', rate)))

    def _figures(self, i: int) -> Values:
        return limit_figures(self._rig, self._seen, i, self.limits[i],
                             float(self._shares.used[i]))

    # ------------------------------------------------------------ requests

    def _answer(self, t: float, request: str) -> Reply:
        if request == 'enable':
            return self._enable(t)
        if request in ('stop', 'disable'):
            if self.state in ('live', 'holding'):
                self._go(t, 'stop', request)
                return Reply(request, True, 'stopping: category 1')
            return Reply(request, True, f'state is {self.state}')
        if request == 'reset':
            return self._reset(t)
        return Reply(request, False, 'unknown request')

    def _enable(self, t: float) -> Reply:
        if self.state == 'live':
            return Reply('enable', True, 'state is live')
        if self.state == 'ready' and not self._broken.any():
            self._raised = {}
            self._seen.rotors.watch_all()
            self._go(t, 'enable', 'enable')
            return Reply('enable', True, 'live')
        if self.state in ('locked', 'ready'):
            return Reply('enable', False, 'failed checks: ' + ', '.join(self._failed()))
        wanted = {'tripped': 'reset first', 'holding': 'reset or stop first'}
        return Reply('enable', False, f'state is {self.state}: {wanted.get(self.state, "wait")}')

    def _reset(self, t: float) -> Reply:
        if self.state not in ('tripped', 'holding'):
            return Reply('reset', self.state in ('locked', 'ready'),
                         f'nothing to reset: state is {self.state}')
        standing = [self.limits[i].name for i in self._raised if self._broken[i]]
        if self._broken[rows.EMERGENCY_STOP] and 'emergency_stop' not in standing:
            standing.append('emergency_stop')
        if standing:
            return Reply('reset', False, 'cause stands: ' + ', '.join(standing))
        self._raised = {}
        self._go(t, 'reset', 'reset')
        if self.state == 'locked':
            self._check(t, int(self._broken.max()))
        return Reply('reset', True, f'state is {self.state}')

    # ------------------------------------------------------------ commands

    def _rotor_command(self, t: float) -> RotorCommand:
        seen = self._seen
        if (self.state in ROTOR_POWER and seen.demand_rad_s is not None
                and t - seen.at[rows.ROTOR_DEMAND] <= self.settings.demand_silence_s):
            self._command = seen.demand_rad_s
            return RotorCommand(seen.demand_stamp_s, self._command)
        self._command = self._zero
        return RotorCommand(self._now_s, self._zero)

    def _carrier_command(self, t: float, gap_s: float) -> CarrierCommand | None:
        seen, anchor = self._seen, self._seen.anchor
        if not anchor.count or not anchor.known:
            return None
        demand = seen.carrier_demand
        if (self.state == 'live' and demand is not None
                and t - seen.at[rows.CARRIER_DEMAND] <= self.settings.carrier_demand_silence_s):
            if demand is not self._followed:
                anchor.follow(*demand)
                self._followed = demand
        else:
            self._followed = None
            anchor.stop(gap_s, self.state not in ROTOR_POWER)
        return CarrierCommand(self._now_s, anchor.setpoint_m, anchor.setpoint_velocity_m_s)
