"""What faults do to measurements on their way."""

from dataclasses import replace
import math
from typing import cast

import numpy as np

from suspended_ctrl.bench.condition import Condition, Effect, Scene
from suspended_ctrl.bench.fault_kinds import (
    ClockJump,
    EmergencyStop,
    ImuBiasStep,
    ImuGone,
    MessageFlood,
    PoseFrozen,
    PoseGone,
    PoseJump,
    PoseLate,
    PoseNan,
    PoseOutliers,
    TelemetryGone,
)
from suspended_ctrl.bench.values import BenchSample
from suspended_ctrl.physics.rotation import exponential, multiply
from suspended_ctrl.physics.values import ImuSample, PoseSample
from suspended_ctrl.rig.frozen import Array, frozen

_NO_POSITION = frozen(np.full(3, math.nan))
_NO_QUATERNION = frozen(np.full(4, math.nan))


def _direction(rng: np.random.Generator) -> Array:
    vector = rng.standard_normal(3)
    unit: Array = vector / np.linalg.norm(vector)
    return unit


class GoneEffect(Effect):
    """A sensor is silent."""

    _topics = {PoseGone: 'pose', ImuGone: 'imu', TelemetryGone: 'rotor_states'}

    def __init__(self, fault: PoseGone | ImuGone | TelemetryGone, scene: Scene) -> None:
        self._topic = self._topics[type(fault)]

    def apply(self, condition: Condition) -> None:
        """Lose every sample."""
        condition.filter(self._topic, lambda sample: None)


class PoseLateEffect(Effect):
    """Poses come later."""

    def __init__(self, fault: PoseLate, scene: Scene) -> None:
        self._by_s = fault.by_s

    def apply(self, condition: Condition) -> None:
        """Add to the latency."""
        condition.later_s['pose'] = condition.later_s.get('pose', 0.0) + self._by_s


class PoseFilterEffect(Effect):
    """A fault that changes poses."""

    def apply(self, condition: Condition) -> None:
        """Change every pose."""
        condition.filter('pose', lambda sample: self.changed(cast(PoseSample, sample)))

    def changed(self, sample: PoseSample) -> PoseSample:
        """Return what becomes of a pose."""
        raise NotImplementedError


class PoseJumpEffect(PoseFilterEffect):
    """Every pose is off by the same step and turn."""

    def __init__(self, fault: PoseJump, scene: Scene) -> None:
        self._step_m = np.array(fault.by_m)
        self._turn = exponential(np.array((0.0, 0.0, math.radians(fault.by_deg))))

    def changed(self, sample: PoseSample) -> PoseSample:
        """Move and turn the pose."""
        return PoseSample(sample.stamp_s, frozen(sample.position_map_m + self._step_m),
                          frozen(multiply(self._turn, sample.quaternion_wxyz)))


class PoseOutliersEffect(PoseFilterEffect):
    """Now and then a pose is far off."""

    def __init__(self, fault: PoseOutliers, scene: Scene) -> None:
        self._fault, self._rng = fault, scene.rng

    def changed(self, sample: PoseSample) -> PoseSample:
        """Throw the pose off, or leave it."""
        fault, rng = self._fault, self._rng
        if rng.random() >= fault.fraction:
            return sample
        turn = exponential(math.radians(fault.by_deg) * _direction(rng))
        return PoseSample(sample.stamp_s,
                          frozen(sample.position_map_m + fault.by_m * _direction(rng)),
                          frozen(multiply(sample.quaternion_wxyz, turn)))


class PoseFrozenEffect(PoseFilterEffect):
    """Every pose repeats the last one before the fault, with its own stamp."""

    def __init__(self, fault: PoseFrozen, scene: Scene) -> None:
        self._channel = scene.channels['pose']
        self._kept: PoseSample | None = None

    def begin(self, t_s: float) -> None:
        """Keep the last pose."""
        self._kept = cast(PoseSample | None, self._channel.last)

    def changed(self, sample: PoseSample) -> PoseSample:
        """Repeat what was kept."""
        self._kept = self._kept or sample
        return replace(self._kept, stamp_s=sample.stamp_s)


class PoseNanEffect(PoseFilterEffect):
    """Poses are no numbers."""

    def __init__(self, fault: PoseNan, scene: Scene) -> None:
        pass

    def changed(self, sample: PoseSample) -> PoseSample:
        """Keep the stamp alone."""
        return PoseSample(sample.stamp_s, _NO_POSITION, _NO_QUATERNION)


class ImuBiasStepEffect(Effect):
    """The IMU's biases step."""

    def __init__(self, fault: ImuBiasStep, scene: Scene) -> None:
        self._rate = fault.rate_rad_s * _direction(scene.rng)
        self._force = fault.force_m_s2 * _direction(scene.rng)

    def apply(self, condition: Condition) -> None:
        """Add to every sample."""
        condition.filter('imu', lambda sample: self._changed(cast(ImuSample, sample)))

    def _changed(self, sample: ImuSample) -> ImuSample:
        return ImuSample(sample.stamp_s, frozen(sample.rate_rad_s + self._rate),
                         frozen(sample.force_m_s2 + self._force))


class EmergencyStopEffect(Effect):
    """The button is pressed."""

    def __init__(self, fault: EmergencyStop, scene: Scene) -> None:
        pass

    def apply(self, condition: Condition) -> None:
        """Press it."""
        condition.emergency_stop = True


class ClockJumpEffect(Effect):
    """Stamps jump."""

    def __init__(self, fault: ClockJump, scene: Scene) -> None:
        self._by_s = fault.by_s

    def apply(self, condition: Condition) -> None:
        """Shift them."""
        condition.clock_offset_s += self._by_s


class MessageFloodEffect(Effect):
    """The newest sample of a topic, over and over."""

    def __init__(self, fault: MessageFlood, scene: Scene) -> None:
        self._channel = scene.channels[fault.topic]
        self._delivery = scene.delivery
        self._period_s = 1.0 / fault.rate_hz
        self._next_s = math.inf

    def begin(self, t_s: float) -> None:
        """Start sending."""
        self._next_s = t_s + self._period_s

    def apply(self, condition: Condition) -> None:
        """Send at every step."""
        condition.repeaters.append(self)

    def repeat(self, until_s: float) -> None:
        """Send the copies that are due, each as late as the topic's samples are."""
        sample: BenchSample | None = self._channel.last
        while self._next_s <= until_s:
            if sample is not None:
                self._delivery.push(self._next_s + self._channel.delay_s, sample)
            self._next_s += self._period_s
