"""The sensors: what each measures of the plant, and how it errs."""

from collections.abc import Callable
from typing import Protocol

import numpy as np

from suspended_ctrl.bench import kernels as k
from suspended_ctrl.bench.delivery import Channel
from suspended_ctrl.bench.plant import Plant
from suspended_ctrl.bench.sensor_kernels import imu_reading, pose_reading
from suspended_ctrl.bench.streams import Streams
from suspended_ctrl.bench.values import BenchSample, EmergencyStopSample
from suspended_ctrl.physics.values import (
    CarrierSample,
    ImuSample,
    PoseSample,
    RotorSample,
    TetherLoadSample,
)
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import ImuSensor, PoseSensor, Rig

EMERGENCY_STOP_RATE_HZ = 20.0
_BLOCK = 256


class Noise:
    """
    Rows of normal numbers, drawn many at a time: a draw costs more than its numbers.

    Parameters
    ----------
    rng : Generator
    sigma : ndarray, shape (n,)

    """

    def __init__(self, rng: np.random.Generator, sigma: Array) -> None:
        self._rng = rng
        self._sigma = np.asarray(sigma, dtype=np.float64)
        self._rows: Array = np.empty((0, self._sigma.size))
        self._next = 0

    def row(self) -> Array:
        """Return the next row, shape (n,)."""
        i = self._next
        if i >= len(self._rows):
            self._rows = self._rng.standard_normal((_BLOCK, self._sigma.size)) * self._sigma
            i = 0
        self._next = i + 1
        row: Array = self._rows[i]
        return row


class Instrument(Protocol):
    """Anything that measures the plant."""

    def measure(self, stamp_s: float) -> BenchSample:
        """Measure now; ``stamp_s`` goes into the sample."""


class PoseInstrument:
    """Motion capture: white noise on position, on attitude as a rotation vector in the body."""

    def __init__(self, sensor: PoseSensor, plant: Plant, rng: np.random.Generator) -> None:
        self._plant = plant
        self._noise = Noise(rng, np.repeat((sensor.position_noise_m, sensor.attitude_noise_rad),
                                           3))
        self._place, self._turn = sensor.position_m, sensor.quaternion_wxyz

    def measure(self, stamp_s: float) -> PoseSample:
        """Measure the marker body's pose."""
        out = pose_reading(self._plant.qpos, self._place, self._turn, self._noise.row())
        out.setflags(write=False)
        return PoseSample(stamp_s, out[:3], out[3:])


class ImuInstrument:
    """
    Gyroscope and accelerometer, in their own axes.

    The gyroscope gives the rate as it is; the accelerometer the mean over the last plant step, as
    one that integrates between samples does. Biases are drawn once: normal, on each axis, with
    the rig's bias figure as their sigma.
    """

    def __init__(self, sensor: ImuSensor, plant: Plant, rng: np.random.Generator,
                 bias_rng: np.random.Generator) -> None:
        self._plant = plant
        self._noise = Noise(rng, np.repeat((sensor.rate_noise_rad_s, sensor.force_noise_m_s2), 3))
        spread = np.repeat((sensor.rate_bias_rad_s, sensor.force_bias_m_s2), 3)
        self.bias = bias_rng.standard_normal(6) * spread
        self._place, self._turn = sensor.position_m, sensor.quaternion_wxyz

    def measure(self, stamp_s: float) -> ImuSample:
        """Measure rate and specific force."""
        plant = self._plant
        out = imu_reading(plant.qpos, plant.qvel, plant.before, self._place, self._turn,
                          plant.step_s, self.bias, self._noise.row())
        out.setflags(write=False)
        return ImuSample(stamp_s, out[:3], out[3:])


class RotorInstrument:
    """Rotor speeds with white noise proportional to speed."""

    def __init__(self, noise_fraction: float, plant: Plant, rng: np.random.Generator) -> None:
        self._speed = plant.rotor[k.SPEED]
        self._noise = Noise(rng, np.full(self._speed.size, noise_fraction))

    def measure(self, stamp_s: float) -> RotorSample:
        """Measure every rotor's speed."""
        speed = self._speed * (1.0 + self._noise.row())
        speed.setflags(write=False)
        return RotorSample(stamp_s, speed)


class CarrierInstrument:
    """Axis positions with white noise; speeds come from the drives' own encoders, without."""

    def __init__(self, noise_m: float, plant: Plant, rng: np.random.Generator) -> None:
        self._position, self._velocity = plant.carrier[k.POSITION], plant.carrier[k.VELOCITY]
        self._noise = Noise(rng, np.full(self._position.size, noise_m))

    def measure(self, stamp_s: float) -> CarrierSample:
        """Measure every axis."""
        position, velocity = self._position + self._noise.row(), self._velocity.copy()
        position.setflags(write=False)
        velocity.setflags(write=False)
        return CarrierSample(stamp_s, position, velocity)


class TetherLoadInstrument:
    """Tension with white noise."""

    def __init__(self, noise_n: float, plant: Plant, rng: np.random.Generator) -> None:
        self._tension = plant.tension
        self._noise = Noise(rng, np.array([noise_n]))

    def measure(self, stamp_s: float) -> TetherLoadSample:
        """Measure the tension."""
        return TetherLoadSample(stamp_s, self._tension() + float(self._noise.row()[0]))


class EmergencyStopButton:
    """The emergency stop; ``pressed`` is set by faults."""

    def __init__(self) -> None:
        self.pressed = False

    def measure(self, stamp_s: float) -> EmergencyStopSample:
        """Report it."""
        return EmergencyStopSample(stamp_s, self.pressed)


def build_channels(rig: Rig, plant: Plant, streams: Streams,
                   button: EmergencyStopButton) -> dict[str, Channel]:
    """
    Make a channel for each sensor that the rig has, by topic.

    Parameters
    ----------
    rig : Rig
        The true one.
    plant : Plant
        What is measured.
    streams : Streams
        Of random numbers, one a sensor.
    button : EmergencyStopButton
        The emergency stop.

    Returns
    -------
    dict of str to Channel

    """
    sensors, pick = rig.sensors, streams.generator
    step = plant.step_s

    def channel(measure: Callable[[float], BenchSample], rate_hz: float,
                latency_s: float = 0.0) -> Channel:
        return Channel(measure, 1.0 / (rate_hz * step), latency_s)

    pose = PoseInstrument(sensors.pose, plant, pick('pose'))
    channels = {'emergency_stop': channel(button.measure, EMERGENCY_STOP_RATE_HZ),
                'pose': channel(pose.measure, sensors.pose.rate_hz, sensors.pose.latency_s)}
    if sensors.imu is not None:
        imu = ImuInstrument(sensors.imu, plant, pick('imu'), pick('imu_bias'))
        channels['imu'] = channel(imu.measure, sensors.imu.rate_hz)
    if sensors.rotor_states is not None:
        rotors = RotorInstrument(sensors.rotor_states.noise_fraction, plant, pick('rotor_states'))
        channels['rotor_states'] = channel(rotors.measure, sensors.rotor_states.rate_hz)
    if sensors.carrier_states is not None and rig.carrier.axes:
        carrier = CarrierInstrument(sensors.carrier_states.noise_m, plant, pick('carrier_states'))
        channels['carrier_states'] = channel(carrier.measure, sensors.carrier_states.rate_hz)
    if sensors.tether_load is not None:
        load = TetherLoadInstrument(sensors.tether_load.noise_n, plant, pick('tether_load'))
        channels['tether_load'] = channel(load.measure, sensors.tether_load.rate_hz)
    return channels
