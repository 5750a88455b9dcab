"""The simulated rig: give it commands, move it through time, take its measurements."""

from collections import Counter
from collections.abc import Sequence
import sys
from typing import Any

from suspended_ctrl.bench import kernels as k
from suspended_ctrl.bench.condition import Condition, Scene
from suspended_ctrl.bench.delivery import Delivery
from suspended_ctrl.bench.effects import build_effect, FaultSchedule
from suspended_ctrl.bench.fault_kinds import Fault, KINDS
from suspended_ctrl.bench.faults import not_on_rig
from suspended_ctrl.bench.mismatch import draw_mismatch, Mismatch
from suspended_ctrl.bench.plant import Plant
from suspended_ctrl.bench.sensors import build_channels, EmergencyStopButton
from suspended_ctrl.bench.step import plant_step_s
from suspended_ctrl.bench.streams import Streams
from suspended_ctrl.bench.values import BenchSample, FaultEvent, Start, Truth
from suspended_ctrl.bench.wind import low_altitude, Wind
from suspended_ctrl.physics.values import Payload
from suspended_ctrl.rig.errors import InputError
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig

_ROUNDING_S = 1e-9


class Bench:
    """
    A simulated rig with its drives, sensors, mismatch and faults.

    Its clock starts at zero and stands still but for ``advance``. The platform starts at its own
    true equilibrium, rotors at rest, carrier at its zero, unless ``start`` says otherwise.

    Parameters
    ----------
    rig : Rig
        As its file says.
    seed : int
        Everything that is random comes from it.
    mismatch : Mismatch, optional
        What the true rig differs in; drawn from the seed if left out.
    faults : sequence of Fault
    start : Start, optional
    wind_m_s : float
        Wind at 20 feet that blows all the time, with its turbulence.

    Attributes
    ----------
    rig, true_rig : Rig
        As the file says; as it is.
    mismatch : Mismatch
    refused : Counter
        Commands refused so far, by topic: 'rotor_command', 'carrier_command'.

    Raises
    ------
    InputError
        If a fault speaks of what the rig has not.

    """

    def __init__(self, rig: Rig, seed: int, mismatch: Mismatch | None = None,
                 faults: Sequence[Fault] = (), start: Start | None = None,
                 wind_m_s: float = 0.0) -> None:
        self._streams = Streams(seed)
        self.rig = rig
        drawn = draw_mismatch(rig, self._streams.generator('mismatch'))
        self.mismatch = drawn if mismatch is None else mismatch
        self.true_rig = self.mismatch.applied_to(rig)
        self.refused: Counter[str] = Counter()
        self._plant = Plant(self.true_rig, plant_step_s(rig), start or Start())
        self._button = EmergencyStopButton()
        self._channels = build_channels(rig, self._plant, self._streams, self._button)
        self._delivery = Delivery()
        height = float(self._plant.qpos[2])
        self._standing_winds = [] if wind_m_s == 0.0 else [
            Wind(low_altitude(height, wind_m_s), self.step_s, self._streams.generator('gust'))]
        self._schedule = self._build_schedule(faults, height)
        self._condition = self._sound()
        self._due = 0
        self._measure()

    @property
    def step_s(self) -> float:
        """Plant step."""
        return self._plant.step_s

    @property
    def t_s(self) -> float:
        """Time of the plant's state: the last whole step."""
        return self._plant.t_s

    @property
    def equilibrium_map_m(self) -> Array:
        """Where the ``base_link`` origin hangs at rest, as the bench started."""
        return self._plant.equilibrium_map_m

    @property
    def payload(self) -> Payload:
        """Payload that truly hangs on the platform."""
        return self._plant.payload

    @property
    def path_start_s(self) -> float | None:
        """Start of the mission's path on the bench's clock, from which faults count."""
        return self._schedule.path_start_s

    @path_start_s.setter
    def path_start_s(self, t_s: float) -> None:
        self._schedule.path_start_s = t_s

    @property
    def fault_events(self) -> tuple[FaultEvent, ...]:
        """Beginnings and ends of faults so far."""
        return tuple(self._schedule.events)

    def advance(self, until_s: float) -> None:
        """
        Step the plant up to ``until_s``, sensors and faults with it.

        Parameters
        ----------
        until_s : float
            The plant stops at its last whole step that is not after it.

        """
        plant, schedule = self._plant, self._schedule
        step, limit = plant.step_s, until_s + _ROUNDING_S
        start = plant.t_s
        while start + step <= limit:
            if schedule.watches_place:
                schedule.watch_place(start, plant.qpos[:3])
            if start + _ROUNDING_S >= schedule.next_change_s:
                self._condition = schedule.update(start, self._sound())
                self._condition.impose(plant, self._channels, self._button)
            if self._condition.winds:
                self._blow()
            plant.step()
            if plant.steps >= self._due:
                self._measure()
            start = plant.t_s
            for repeater in self._condition.repeaters:
                repeater.repeat(start)

    def command_rotors(self, t_s: float, speed_rad_s: object) -> bool:
        """
        Command the rotor drives; counts from ``t_s`` on, within a plant step as well.

        Parameters
        ----------
        t_s : float
            Not before the last command; ``advance`` to it first.
        speed_rad_s : array_like, shape (n,)
            Clipped to what the drives can do; below its least speed a rotor coasts to rest.

        Returns
        -------
        bool
            False if it was refused: a wrong length, or not all finite numbers.

        """
        if 'rig_bench' in self.silent_parts(t_s):
            return True
        accepted = self._plant.command_rotors(t_s, speed_rad_s)
        if not accepted:
            self.refused['rotor_command'] += 1
        return accepted

    def command_carrier(self, t_s: float, position_m: object, velocity_m_s: object) -> bool:
        """
        Command the carrier's axes; counts from the next plant step on.

        Parameters
        ----------
        t_s : float
            As for the rotors.
        position_m : array_like, shape (k,)
            Setpoints, clipped to the travel.
        velocity_m_s : array_like, shape (k,)
            Checked, then left: these drives follow positions.

        Returns
        -------
        bool
            As for the rotors.

        """
        if 'rig_bench' in self.silent_parts(t_s):
            return True
        accepted = self._plant.command_carrier(t_s, position_m, velocity_m_s)
        if not accepted:
            self.refused['carrier_command'] += 1
        return accepted

    def samples(self, until_s: float) -> list[BenchSample]:
        """Take the samples that have arrived by ``until_s``, in order of arrival, each once."""
        arrived = self._delivery.until(until_s)
        return [] if 'rig_bench' in self.silent_parts(until_s) else arrived

    def silent_parts(self, t_s: float) -> frozenset[str]:
        """Nodes that a fault has killed or stopped at ``t_s``, by the names of executables."""
        return self._schedule.silent_parts(t_s)

    def truth(self) -> Truth:
        """Return what is the case at ``t_s``."""
        return self._plant.truth()

    def attach_payload(self, mass_kg: float, position_m: Array) -> None:
        """
        Hang a point mass on the platform in place of what hangs there.

        Parameters
        ----------
        mass_kg : float
            Above zero.
        position_m : ndarray, shape (3,)
            From the ``base_link`` origin.

        """
        self._plant.set_payload(Payload(mass_kg, frozen(position_m, 3)))

    def release_payload(self) -> None:
        """Let go of what hangs on the platform, if anything does."""
        if self._plant.payload.mass_kg > 0.0:
            self._plant.set_payload(Payload())

    def let_go(self) -> None:
        """Release a platform that was held at its start."""
        self._plant.held = False

    def _measure(self) -> None:
        plant = self._plant
        t_s, steps = plant.t_s, plant.steps
        stamp_s = t_s + self._condition.clock_offset_s
        due = sys.maxsize
        for channel in self._channels.values():
            if channel.due <= steps:
                channel.take(t_s, stamp_s, self._delivery)
            if channel.due < due:
                due = channel.due
        self._due = due

    def _blow(self) -> None:
        wind = self._plant.world[k.WIND:k.WIND + 2]
        wind[:] = 0.0
        for source in self._condition.winds:
            wind += source.velocity_map()

    def _sound(self) -> Condition:
        condition = Condition.sound(self.rig)
        condition.winds.extend(self._standing_winds)
        return condition

    def _build_schedule(self, faults: Sequence[Fault], height_m: float) -> FaultSchedule:
        effects: list[Any] = []
        numbers: Counter[int] = Counter()
        for i, fault in enumerate(faults):
            missing = not_on_rig(fault, self.rig)
            if missing is not None:
                raise InputError(f'faults[{i}].{missing.key}: value {missing.value}: '
                                 f'{missing.allowed}')
            kind = KINDS.index(type(fault))
            scene = Scene(self.rig, self.step_s, height_m,
                          self._streams.fault_generator(kind, numbers[kind]), self._channels,
                          self._delivery, self.release_payload)
            numbers[kind] += 1
            effects.append(build_effect(fault, scene))
        return FaultSchedule(faults, effects)
