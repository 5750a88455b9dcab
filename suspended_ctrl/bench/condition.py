"""The condition the rig is in: what the faults that are active together make of it."""

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np

from suspended_ctrl.bench import kernels as k
from suspended_ctrl.bench.delivery import Channel, Delivery, Filter
from suspended_ctrl.bench.plant import Plant
from suspended_ctrl.bench.sensors import EmergencyStopButton
from suspended_ctrl.bench.wind import Wind
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rig


class Repeater(Protocol):
    """Sends something at every plant step."""

    def repeat(self, until_s: float) -> None:
        """Send what is due up to ``until_s``."""


@dataclass(eq=False)
class Condition:
    """
    A rig without a fault, to which each active fault adds what it does.

    Attributes
    ----------
    rotor_mode, rotor_weakness : ndarray, shape (n,)
        A mode of ``kernels``, a factor on thrust.
    axis_mode, axis_speed_m_s : ndarray, shape (k,)
        A mode of ``kernels``, the speed of a runaway.
    tether_shorter_m : float
    tether_cut : bool
    push_map_n : ndarray, shape (3,)
    winds : list of Wind
    clock_offset_s : float
    emergency_stop : bool
    filters : dict of str to list of callable
        On the samples of a topic.
    later_s : dict of str to float
        Added to the latency of a topic.
    repeaters : list of Repeater

    """

    rotor_mode: Array
    rotor_weakness: Array
    axis_mode: Array
    axis_speed_m_s: Array
    tether_shorter_m: float = 0.0
    tether_cut: bool = False
    push_map_n: Array = field(default_factory=lambda: np.zeros(3))
    winds: list[Wind] = field(default_factory=list)
    clock_offset_s: float = 0.0
    emergency_stop: bool = False
    filters: dict[str, list[Filter]] = field(default_factory=dict)
    later_s: dict[str, float] = field(default_factory=dict)
    repeaters: list[Repeater] = field(default_factory=list)

    @classmethod
    def sound(cls, rig: Rig) -> 'Condition':
        """Make the condition without a fault."""
        count, axes = rig.rotors.count, len(rig.carrier.axes)
        return cls(np.full(count, k.RUNS), np.ones(count), np.full(axes, k.FOLLOWS),
                   np.zeros(axes))

    def filter(self, topic: str, change: Filter) -> None:  # noqa: A003
        """Add a filter on the samples of ``topic``."""
        self.filters.setdefault(topic, []).append(change)

    def impose(self, plant: Plant, channels: dict[str, Channel],
               button: EmergencyStopButton) -> None:
        """Bring plant and sensors into this condition."""
        plant.rotor[k.ROTOR_MODE] = self.rotor_mode
        plant.rotor[k.WEAKNESS] = self.rotor_weakness
        plant.set_axis_faults(self.axis_mode, self.axis_speed_m_s)
        plant.set_tether(self.tether_shorter_m, self.tether_cut)
        plant.world[k.PUSH:k.PUSH + 3] = self.push_map_n
        # Calm, until the winds there are say otherwise.
        plant.world[k.WIND:k.WIND + 3] = 0.0
        button.pressed = self.emergency_stop
        for topic, channel in channels.items():
            channel.filters = self.filters.get(topic, [])
            channel.later_s = self.later_s.get(topic, 0.0)


@dataclass(frozen=True, eq=False)
class Scene:
    """
    What an effect may need when it is made.

    Attributes
    ----------
    rig : Rig
        As its file says.
    step_s : float
    height_m : float
        Of the platform above the floor, which is map's z = 0.
    rng : Generator
        The fault's own.
    channels : dict of str to Channel
    delivery : Delivery
    drop_payload : callable

    """

    rig: Rig
    step_s: float
    height_m: float
    rng: np.random.Generator
    channels: dict[str, Channel]
    delivery: Delivery
    drop_payload: Callable[[], None]


class Effect:
    """
    What one fault does while it is active.

    Parameters
    ----------
    fault : a fault
    scene : Scene

    """

    def begin(self, t_s: float) -> None:
        """Note that the fault begins."""

    def apply(self, condition: Condition) -> None:
        """Add to the condition; called whenever the set of active faults changes."""
