"""What faults do to the drives, the tether, the carrier and the air."""

from suspended_ctrl.bench import kernels as k
from suspended_ctrl.bench.condition import Condition, Effect, Scene
from suspended_ctrl.bench.fault_kinds import (
    CarrierRunaway,
    CarrierStall,
    GustFault,
    PayloadDrop,
    Push,
    RotorDead,
    RotorStuck,
    RotorWeak,
    TetherCut,
    TetherSnag,
)
from suspended_ctrl.bench.wind import low_altitude, Wind


class RotorModeEffect(Effect):
    """A dead rotor coasts down, a stuck one keeps its speed."""

    def __init__(self, fault: RotorDead | RotorStuck, scene: Scene) -> None:
        self._rotor = scene.rig.rotors.names.index(fault.rotor)
        self._mode = k.DEAD if isinstance(fault, RotorDead) else k.STUCK

    def apply(self, condition: Condition) -> None:
        """Set the rotor's mode."""
        condition.rotor_mode[self._rotor] = self._mode


class RotorWeakEffect(Effect):
    """A part of the thrust is missing."""

    def __init__(self, fault: RotorWeak, scene: Scene) -> None:
        self._rotor = scene.rig.rotors.names.index(fault.rotor)
        self._factor = fault.factor

    def apply(self, condition: Condition) -> None:
        """Weaken the rotor; several such faults multiply."""
        condition.rotor_weakness[self._rotor] *= self._factor


class TetherCutEffect(Effect):
    """The tether pulls no more."""

    def __init__(self, fault: TetherCut, scene: Scene) -> None:
        pass

    def apply(self, condition: Condition) -> None:
        """Cut it."""
        condition.tether_cut = True


class TetherSnagEffect(Effect):
    """The tether is shorter."""

    def __init__(self, fault: TetherSnag, scene: Scene) -> None:
        self._shorter_m = fault.shorter_by_m

    def apply(self, condition: Condition) -> None:
        """Shorten it."""
        condition.tether_shorter_m += self._shorter_m


class CarrierEffect(Effect):
    """An axis stands, or runs away."""

    def __init__(self, fault: CarrierStall | CarrierRunaway, scene: Scene) -> None:
        self._axis = scene.rig.carrier.axes.index(fault.axis)
        runs = isinstance(fault, CarrierRunaway)
        self._mode = k.RUNS_AWAY if runs else k.STOPS
        self._speed_m_s = fault.speed_m_s if isinstance(fault, CarrierRunaway) else 0.0

    def apply(self, condition: Condition) -> None:
        """Set the axis' mode."""
        condition.axis_mode[self._axis] = self._mode
        condition.axis_speed_m_s[self._axis] = self._speed_m_s


class PushEffect(Effect):
    """Somebody pushes the platform."""

    def __init__(self, fault: Push, scene: Scene) -> None:
        self._force_n = fault.force_n

    def apply(self, condition: Condition) -> None:
        """Add the force."""
        condition.push_map_n += self._force_n


class GustEffect(Effect):
    """Wind blows."""

    def __init__(self, fault: GustFault, scene: Scene) -> None:
        self._wind = Wind(low_altitude(scene.height_m, fault.speed_m_s), scene.step_s, scene.rng)

    def apply(self, condition: Condition) -> None:
        """Add the wind."""
        condition.winds.append(self._wind)


class PayloadDropEffect(Effect):
    """The payload falls off."""

    def __init__(self, fault: PayloadDrop, scene: Scene) -> None:
        self._drop = scene.drop_payload

    def begin(self, t_s: float) -> None:
        """Drop it."""
        self._drop()
