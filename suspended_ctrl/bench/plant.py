"""The plant: MuJoCo's body on its tether, the true drives, one step at a time."""

import math

import mujoco
import numpy as np

from suspended_ctrl.bench import kernels as k
from suspended_ctrl.bench.drives import (
    axis_limits,
    rotor_limits,
    row,
    take_positions,
    take_speeds,
)
from suspended_ctrl.bench.model import build_model, settled
from suspended_ctrl.bench.values import Start, Truth
from suspended_ctrl.physics.values import Payload
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig

# What every driver does when commands stop coming.
ROTOR_WATCHDOG_S = 0.080
CARRIER_WATCHDOG_S = 0.300
# Dry air at 20 degrees Celsius and 101325 Pa, ideal gas law with R = 287.05287 J/(kg K), ISO 2533.
AIR_DENSITY_KG_M3 = 1.20411
_NEVER = math.inf


class Plant:
    """
    The true rig in motion.

    Parameters
    ----------
    rig : Rig
        The true one.
    step_s : float
        Plant step.
    start : Start

    Attributes
    ----------
    qpos, qvel : ndarray, shapes (7,), (6,)
        MuJoCo's state, live: position and quaternion; velocity in map, rate in ``base_link``.
    rotor, carrier, fixed, world, before : ndarray
        As numbered in ``kernels``; faults write here.
    held : bool
        The platform is clamped where it is; drives work.

    """

    def __init__(self, rig: Rig, step_s: float, start: Start) -> None:
        self.rig = rig
        self.step_s = step_s
        self.held = start.held
        self.payload = Payload()
        self._steps = 0
        self._shorter_m = 0.0
        self._cut = False
        self._following = False
        count, axes = rig.rotors.count, len(rig.carrier.axes)
        self.rotor = np.zeros((k.ROTOR_ROWS, count))
        self.rotor[k.WEAKNESS] = 1.0
        self.carrier = np.zeros((k.CARRIER_ROWS, axes))
        self._axis_fault = np.full(axes, k.FOLLOWS)
        self._set_axis_modes()
        self.fixed = np.zeros(k.FIXED_SIZE)
        self.world = np.zeros(k.WORLD_SIZE)
        self.before = np.zeros(k.BEFORE_SIZE)
        self._rotor_fixed = _rotor_table(rig)
        self._carrier_fixed = _carrier_table(rig)
        self._curve_square = np.ascontiguousarray(rig.rotors.curve_speed_rad_s ** 2)
        self._thrusts = np.ascontiguousarray(rig.rotors.curve_thrust_n)
        self._next_speed = self.rotor[k.NEXT]
        self._setpoint = self.carrier[k.SETPOINT]
        self._rotor_limits = rotor_limits(rig.rotors)
        self._axis_limits = axis_limits(rig.carrier)
        self._switch_s = _NEVER
        self._rotor_deadline_s = _NEVER
        self._carrier_deadline_s = _NEVER
        self._fill_fixed()
        # Carrier readings start at zero, or at the end of travel next to it.
        take_positions(np.zeros(axes), np.zeros(axes), self._axis_limits,
                       self._setpoint)
        self.carrier[k.POSITION] = self._setpoint
        anchor = rig.carrier.anchor_map(self.carrier[k.POSITION])
        self.world[k.ANCHOR:k.ANCHOR + 3] = anchor
        self._build()
        position = settled(self._model, anchor)
        self.equilibrium_map_m = frozen(position[:3])
        self.qpos[:] = position
        self.qpos[:3] += start.offset_map_m
        self._data.mocap_pos[0] = anchor
        self.before[6:] = self.qpos[3:7]

    @property
    def t_s(self) -> float:
        """Time of the state."""
        return self._steps * self.step_s

    @property
    def steps(self) -> int:
        """How many steps were made."""
        return self._steps

    def command_rotors(self, t_s: float, speed_rad_s: object) -> bool:
        """Set what the drives go to from ``t_s`` on; false if it is no command."""
        speed = row(speed_rad_s, self._next_speed.size)
        if speed is None:
            return False
        if self._switch_s < _NEVER:
            # A second command within one plant step: the first counts from the step's start.
            self.rotor[k.TARGET] = self._next_speed
        if not take_speeds(speed, self._rotor_limits, self._next_speed):
            return False
        self._switch_s = t_s
        self._rotor_deadline_s = t_s + ROTOR_WATCHDOG_S
        return True

    def command_carrier(self, t_s: float, position_m: object, velocity_m_s: object) -> bool:
        """Set where the axes go from the next step on; false if it is no command."""
        position = row(position_m, self._setpoint.size)
        velocity = row(velocity_m_s, self._setpoint.size)
        if position is None or velocity is None or not take_positions(
                position, velocity, self._axis_limits, self._setpoint):
            return False
        self._carrier_deadline_s = t_s + CARRIER_WATCHDOG_S
        if not self._following:
            self._following = True
            self._set_axis_modes()
        return True

    def step(self) -> None:
        """Make one step."""
        start = self._steps * self.step_s
        end = start + self.step_s
        if self._rotor_deadline_s < end and self._switch_s >= end:
            self._next_speed[:] = 0.0
            self._switch_s = self._rotor_deadline_s
            self._rotor_deadline_s = _NEVER
        if self._carrier_deadline_s < end:
            self._following = False
            self._set_axis_modes()
            self._carrier_deadline_s = _NEVER
        k.apply_forces(self.qpos, self.qvel, self._force, self._anchor, self.rotor,
                       self._rotor_fixed, self._curve_square, self._thrusts, self.carrier,
                       self._carrier_fixed, self.fixed, self.world, self.before,
                       self._switch_s - start)
        if self._switch_s < end:
            self._switch_s = _NEVER
        self._steps += 1
        if not self.held:
            mujoco.mj_step(self._model, self._data)

    def tension(self) -> float:
        """Tension in the tether now, N."""
        world = self.world
        return float(k.tether_pull(
            self.qpos, self.qvel, world[k.ANCHOR:k.ANCHOR + 3],
            world[k.ANCHOR_VELOCITY:k.ANCHOR_VELOCITY + 3], self.fixed)[3])

    def truth(self) -> Truth:
        """Everything about the state, copied."""
        qpos, qvel, world = self.qpos.copy(), self.qvel.copy(), self.world.copy()
        rotor, carrier = self.rotor.copy(), self.carrier.copy()
        acceleration = (qvel[:3] - self.before[:3]) / self.step_s
        for array in (qpos, qvel, world, rotor, carrier, acceleration):
            array.setflags(write=False)
        return Truth(self.t_s, qpos[:3], qvel[:3], qpos[3:], qvel[3:], acceleration,
                     self.tension(), rotor[k.SPEED],
                     rotor[k.THRUST], world[k.ANCHOR:k.ANCHOR + 3], carrier[k.POSITION],
                     carrier[k.VELOCITY], self.payload)

    def set_payload(self, payload: Payload) -> None:
        """Hang a point mass on the platform; nothing at zero mass. Velocities stay as they are."""
        self.payload = payload
        qpos, qvel = self.qpos, self.qvel
        self._build()
        self.qpos[:] = qpos
        self.qvel[:] = qvel

    def set_tether(self, shorter_m: float, cut: bool) -> None:
        """Shorten the tether by ``shorter_m`` against the rig, or cut it."""
        self._shorter_m, self._cut = shorter_m, cut
        self._fill_fixed()
        self._set_model_tether()

    def set_axis_faults(self, mode: Array, speed_m_s: Array) -> None:
        """Make axes STOPS or RUNS_AWAY whatever they are told; shapes (k,), FOLLOWS is sound."""
        self._axis_fault = mode
        self.carrier[k.RUNAWAY] = speed_m_s
        self._set_axis_modes()

    def _build(self) -> None:
        """Build the model for the present payload."""
        model = build_model(self.rig, self.payload, self.step_s)
        data = mujoco.MjData(model)
        self._model, self._data = model, data
        # Views into MuJoCo's memory: indexing `data` anew costs more than the step's arithmetic.
        self.qpos, self.qvel = data.qpos, data.qvel
        self._force, self._anchor = data.qfrc_applied, data.mocap_pos
        self._anchor[0] = self.world[k.ANCHOR:k.ANCHOR + 3]
        self.fixed[k.CENTRE:k.CENTRE + 3] = model.body_ipos[model.nbody - 1]
        self._set_model_tether()

    def _set_model_tether(self) -> None:
        self._model.tendon_stiffness[0] = self.fixed[k.STIFFNESS]
        self._model.tendon_lengthspring[0] = (0.0, self.fixed[k.REST_LENGTH])

    def _fill_fixed(self) -> None:
        tether, fixed = self.rig.tether, self.fixed
        fixed[k.STEP] = self.step_s
        fixed[k.STIFFNESS] = 0.0 if self._cut else tether.stiffness_n_per_m
        fixed[k.REST_LENGTH] = max(tether.rest_length_m - self._shorter_m, 0.0)
        fixed[k.DAMPING] = tether.damping_n_s_per_m
        fixed[k.AIR_DENSITY] = AIR_DENSITY_KG_M3
        fixed[k.HOOK:k.HOOK + 3] = tether.hook_m
        fixed[k.DRAG_AREA:k.DRAG_AREA + 3] = self.rig.body.drag_area_m2
        fixed[k.ANCHOR_ZERO:k.ANCHOR_ZERO + 3] = self.rig.carrier.anchor_map(
            np.zeros(len(self.rig.carrier.axes)))

    def _set_axis_modes(self) -> None:
        sound = k.FOLLOWS if self._following else k.STOPS
        self.carrier[k.AXIS_MODE] = np.where(self._axis_fault == k.FOLLOWS, sound,
                                             self._axis_fault)


def _rotor_table(rig: Rig) -> Array:
    rotors = rig.rotors
    table = np.empty((rotors.count, k.ROTOR_COLUMNS))
    table[:, 0:3] = rotors.position_m
    table[:, 3:6] = rotors.axis
    table[:, k.TORQUE_COEFFICIENT] = rotors.torque_coefficient_nm_s2
    table[:, k.SPIN] = rotors.spin
    table[:, k.TIME_CONSTANT] = rotors.time_constant_s
    table[:, k.INERTIA] = rotors.inertia_kg_m2
    return table


def _carrier_table(rig: Rig) -> Array:
    carrier = rig.carrier
    table = np.empty((len(carrier.axes), k.CARRIER_COLUMNS))
    table[:, 0:3] = carrier.direction_map
    table[:, k.LOWER] = carrier.min_m
    table[:, k.UPPER] = carrier.max_m
    table[:, k.SPEED_MAX] = carrier.speed_max_m_s
    table[:, k.ACCELERATION_MAX] = carrier.acceleration_max_m_s2
    table[:, k.AXIS_TIME_CONSTANT] = carrier.time_constant_s
    return table
