"""
Walks through the supervisor's states under any events, with what must hold checked at every tick.

The checks know what was sent, not how the supervisor works.
"""

from dataclasses import replace

from cell import Cell, EPOCH_S
import numpy as np

from suspended_ctrl.physics.values import (
    CarrierCommand,
    CarrierSample,
    Estimate,
    ImuSample,
    Payload,
    PayloadEvent,
    PoseSample,
    RotorCommand,
    RotorSample,
    TetherLoadSample,
)
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety.sequence import ROTOR_POWER, TRANSITIONS
from suspended_ctrl.safety.settings import SafetySettings
from suspended_ctrl.safety.values import EmergencyStop, Heartbeat, Refused, SafetyOutputs

WALK_TICK_S = 0.010
# Short, so that a walk of seconds sees them.
SHORT = {'stop_timeout_s': 0.5, 'hold_timeout_s': 0.6, 'rest_time_s': 0.1}
# Longest silence with which each may still count as there.
FRESH_S = {'pose': 0.2, 'odometry': 0.075, 'rotor_demand': 0.080, 'rotor_states': 0.150,
           'carrier_states': 0.300, 'emergency_stop': 0.200}
SENDERS = (*FRESH_S, 'imu', 'carrier_demand')
REQUESTS = ('enable', 'disable', 'stop', 'reset')

WEIRD = (np.nan, np.inf, -np.inf, 0.0, -1.0, 1e308, -1e308, 5e-324, 1e9)
ARRAYS = (
    *(np.full(n, x) for n in (0, 1, 3, 4, 7, 8, 9, 13) for x in (np.nan, np.inf, 0.5, 400.0)),
    np.zeros((3, 3)), np.zeros((8, 1)), np.full((12, 12), np.nan), np.zeros((0, 3)),
    np.array(1.0), np.full(8, 400, dtype=np.int64), np.full(8, 400.0, dtype=np.float32),
    np.full(3, None), np.array(['a', 'b', 'c']), None, 'text', 3.0, [1.0, 2.0, 3.0], (),
    np.full(16, 400.0)[::2], np.ones(4) * 0.5)
KINDS = ('pose', 'imu', 'rotors', 'carrier', 'load', 'odometry', 'rotor_demand',
         'carrier_demand', 'emergency_stop', 'heartbeat', 'payload', 'refused', 'nothing',
         'unknown')


def junk(kind: str, stamp_s: object, a: object, b: object) -> object:
    """Make a message of a kind whose content is anything."""
    matrix = a if isinstance(a, np.ndarray) and a.ndim == 2 else np.eye(12) * 1e-8
    return {
        'pose': PoseSample(stamp_s, a, b), 'imu': ImuSample(stamp_s, a, b),
        'rotors': RotorSample(stamp_s, a), 'carrier': CarrierSample(stamp_s, a, b),
        'load': TetherLoadSample(stamp_s, b),
        'odometry': Estimate(stamp_s, a, b, np.array([1.0, 0, 0, 0]), a, matrix, a, a, Payload(),
                             stamp_s, True),
        'rotor_demand': RotorCommand(stamp_s, a),
        'carrier_demand': CarrierCommand(stamp_s, a, b),
        # Whatever is not a plain false is a stop; these walks press it by an event of their own.
        'emergency_stop': EmergencyStop(False), 'heartbeat': Heartbeat(),
        'payload': PayloadEvent(stamp_s, 0.6), 'refused': Refused('rotor_demand', 'names'),
        'nothing': None, 'unknown': object(),
    }[kind]


WALK_LIMITS = ('tilt', 'speed', 'rates', 'unsure', 'invalid', 'rotor', 'peer', 'mission')
# The message without which the supervisor cannot know; the others are told by every tick.
TOLD_BY = dict.fromkeys(('tilt', 'speed', 'rates', 'unsure', 'invalid'), 'odometry')


class Walk(Cell):
    """A cell whose events come from outside and whose outputs are judged at every tick."""

    def __init__(self, rig: Rig) -> None:
        super().__init__(rig, **SHORT)
        self.settings: SafetySettings = self.supervisor.settings
        self.heard = dict.fromkeys(SENDERS, -np.inf)
        self.pressed = False
        self.broken: set[str] = set()
        # Of those, what a message has told the supervisor.
        self.told: set[str] = set()
        self.enabled_since_trip = False
        self.power_without_live_s = 0.0
        self.good_demand: np.ndarray | None = None
        self.good_demand_at = -np.inf
        self.change['rotor_demand'] = self.demand_on_its_way
        self.bad_demand: object = None
        self.demand_shift_s = 0.0
        self.rig_lower = np.where(rig.rotors.reversible, -rig.rotors.speed_max_rad_s, 0.0)
        self.thrown: np.ndarray | None = None
        self.thrown_at = -np.inf

    def demand_on_its_way(self, message: RotorCommand) -> RotorCommand:
        if self.bad_demand is not None:
            return replace(message, speed_rad_s=self.bad_demand)
        message = replace(message, stamp_s=message.stamp_s + self.demand_shift_s)
        if -0.2 <= message.stamp_s - self.now_s <= 0.05:
            self.good_demand, self.good_demand_at = message.speed_rad_s, self.t
        return message

    # ------------------------------------------------------------ events

    def go(self, ticks: int) -> None:
        for _ in range(ticks):
            self.step()

    def step(self, *requests: str, dt: float = WALK_TICK_S) -> None:
        """One tick, judged."""
        for limit in WALK_LIMITS:
            if TOLD_BY.get(limit) not in self.silent:
                (self.told.add if limit in self.broken else self.told.discard)(limit)
        out = self.tick(*requests, dt=dt)
        for name in SENDERS:
            if name not in self.silent:
                # The slowest of them comes every tenth of Cell's own ticks.
                period = {'emergency_stop': 0.05, 'carrier_states': 0.02}.get(name, 0.0)
                if self.t - self.heard[name] >= period - 1e-9 or dt > WALK_TICK_S:
                    self.heard[name] = self.t
        self.judge(out, requests, dt)

    def press(self, pressed: bool) -> None:
        self.pressed = pressed
        self.extra = [EmergencyStop(True)] if pressed else []

    def hear(self, name: str, there: bool) -> None:
        if there:
            self.silent.discard(name)
        else:
            self.silent.add(name)

    def break_limit(self, name: str, on: bool) -> None:
        """Something wrong with the rig itself, or put right again."""
        (self.broken.add if on else self.broken.discard)(name)
        angle = 0.8 if 'tilt' in self.broken else 0.0
        self.quaternion = np.array([np.cos(0.5 * angle), np.sin(0.5 * angle), 0.0, 0.0])
        self.velocity = np.array([3.6 if 'speed' in self.broken else 0.0, 0.0, 0.0])
        self.rate = np.array([0.0, 0.0, 5.0 if 'rates' in self.broken else 0.0])
        self.sigma_m = 0.05 if 'unsure' in self.broken else 0.0002
        self.valid = 'invalid' not in self.broken
        self.speed_factor[1] = 0.5 if 'rotor' in self.broken else 1.0
        self.peers = {'effort_allocator': 'peer' not in self.broken,
                      'mission_player': 'mission' not in self.broken}

    def spoil_demand(self, how: object) -> None:
        self.bad_demand = how

    def shift_demand(self, seconds: float) -> None:
        self.demand_shift_s = seconds

    def jump_clock(self, seconds: float) -> None:
        self.clock_offset_s = EPOCH_S + seconds

    def throw(self, kind: str, shift_s: float, a: object, b: object) -> None:
        """One message of anything beside the others, for one tick."""
        keep = self.extra
        self.extra = [*keep, junk(kind, self.now_s + shift_s, a, b)]
        if kind == 'rotor_demand':
            self.note_thrown(shift_s, a)
        self.step()
        self.extra = keep

    def note_thrown(self, shift_s: float, speed: object) -> None:
        if (isinstance(speed, np.ndarray) and speed.dtype == np.float64
                and speed.shape == self.rig_lower.shape and np.isfinite(speed).all()
                and -0.2 <= shift_s - WALK_TICK_S <= 0.05):
            self.thrown, self.thrown_at = speed, self.t + WALK_TICK_S

    # ------------------------------------------------------------ what must hold

    def judge(self, out: SafetyOutputs, requests: tuple[str, ...], dt: float) -> None:
        speed = out.rotor_command.speed_rad_s
        assert speed.shape == self.rig_lower.shape
        assert np.isfinite(speed).all()
        assert ((speed >= self.rig_lower) & (speed <= self.rig.rotors.speed_max_rad_s)).all()
        if out.state not in ROTOR_POWER:
            assert not speed.any()
        if speed.any():
            fresh = (self.good_demand is not None and np.array_equal(speed, self.good_demand)
                     and self.t - self.good_demand_at <= 0.080 + 0.001)
            thrown = (self.thrown is not None and np.array_equal(speed, self.thrown)
                      and self.t - self.thrown_at <= 0.080 + 0.001)
            assert fresh or thrown, (speed, self.good_demand, self.t - self.good_demand_at)
        if self.rig.carrier.axes and out.carrier_command is not None:
            assert np.isfinite(out.carrier_command.position_m).all()
            assert np.isfinite(out.carrier_command.velocity_m_s).all()
        # For a limited time, and never past a stop's or a hold's end.
        if out.state in ('stopping', 'holding'):
            self.power_without_live_s += dt
            assert self.power_without_live_s <= 0.5 + 0.6 + 0.1 + 2 * dt
        else:
            self.power_without_live_s = 0.0
        for change in out.changes:
            assert change.after in {after for (before, _), after in TRANSITIONS.items()
                                    if before == change.before}
            assert change.cause
            if change.after == 'live' and change.before == 'ready':
                self.judge_enable(out, requests)
            if change.after == 'tripped':
                self.enabled_since_trip = False
        if out.state in ROTOR_POWER:
            assert self.enabled_since_trip
        if self.pressed:
            assert out.state in ('tripped',)
        for event in out.events:
            assert event.stop_category in (0, 1, 2, None)
            assert all(isinstance(name, str) for name, _ in event.values)
        assert len(out.replies) == len(requests)

    def judge_enable(self, out: SafetyOutputs, requests: tuple[str, ...]) -> None:
        assert 'enable' in requests
        assert any(r.request == 'enable' and r.success for r in out.replies)
        assert not self.pressed
        # A weak rotor does not show while it stands; the mission player is not required.
        wrong = self.told - {'rotor', 'mission'}
        assert not wrong, wrong
        for name, age in FRESH_S.items():
            assert self.t - self.heard[name] <= age + 1e-6, name
        self.enabled_since_trip = True
