"""Rigs for the bench's tests: the reference rigs with something changed, and plants of them."""

from dataclasses import replace

import numpy as np

from suspended_ctrl.bench import kernels as k
from suspended_ctrl.bench.bench import Bench
from suspended_ctrl.bench.mismatch import Mismatch
from suspended_ctrl.bench.plant import Plant
from suspended_ctrl.bench.values import Start
from suspended_ctrl.rig.file import load_rig
from suspended_ctrl.rig.frozen import frozen
from suspended_ctrl.rig.rig import Rig

BAY_HEAD = load_rig('bay_head')
SEAM_HEAD = load_rig('seam_head')
TICK_S = 0.005


def with_body(rig: Rig, **changes) -> Rig:
    """Return the rig with fields of its body changed; arrays may be lists."""
    return replace(rig, body=replace(rig.body, **_frozen(changes)))


def with_tether(rig: Rig, **changes) -> Rig:
    """Return the rig with fields of its tether changed."""
    return replace(rig, tether=replace(rig.tether, **_frozen(changes)))


def with_sensors(rig: Rig, **changes) -> Rig:
    """Return the rig with sensors exchanged."""
    return replace(rig, sensors=replace(rig.sensors, **changes))


def quiet_imu(rig: Rig, **changes) -> Rig:
    """Return the rig with an IMU that does not err."""
    imu = replace(rig.sensors.imu, rate_noise_rad_s=0.0, rate_bias_rad_s=0.0,
                  force_noise_m_s2=0.0, force_bias_m_s2=0.0, **_frozen(changes))
    return with_sensors(rig, imu=imu)


def quiet_pose(rig: Rig, **changes) -> Rig:
    """Return the rig with motion capture that does not err."""
    pose = replace(rig.sensors.pose, position_noise_m=0.0, attitude_noise_rad=0.0,
                   **_frozen(changes))
    return with_sensors(rig, pose=pose)


def ideal(rig: Rig, mass_kg: float, stiffness_n_per_m: float, rest_length_m: float,
          inertia_kg_m2=((1.0, 0, 0), (0, 1.0, 0), (0, 0, 1.0)), hook_m=(0.0, 0.0, 0.0)) -> Rig:
    """Return a rig without damping, drag, tether mass or offsets, for textbook formulas."""
    rig = with_body(rig, mass_kg=mass_kg, inertia_kg_m2=inertia_kg_m2,
                    centre_of_mass_m=(0.0, 0.0, 0.0), drag_area_m2=(0.0, 0.0, 0.0))
    return with_tether(rig, stiffness_n_per_m=stiffness_n_per_m, rest_length_m=rest_length_m,
                       hook_m=hook_m, damping_n_s_per_m=0.0, mass_kg=0.0)


def free_plant(rig: Rig, step_s: float = 0.0025) -> Plant:
    """Return a plant whose tether is cut."""
    plant = Plant(rig, step_s, Start())
    plant.set_tether(0.0, True)
    return plant


def moving(plant: Plant, *, velocity=(0.0, 0.0, 0.0), rate=(0.0, 0.0, 0.0)) -> None:
    """Set the plant moving, as if it had moved so before."""
    plant.qvel[:] = (*velocity, *rate)
    plant.before[:6] = plant.qvel


def exact_bench(rig: Rig = BAY_HEAD, seed: int = 0, **options) -> Bench:
    """Return a bench without mismatch."""
    return Bench(rig, seed, Mismatch.none(rig), **options)


def run(bench: Bench, until_s: float, speed=None, position=None) -> list:
    """Advance tick by tick, commanding the same each time; all samples on the way."""
    axes = len(bench.rig.carrier.axes)
    samples = []
    tick = round(bench.t_s / TICK_S)
    while (tick + 1) * TICK_S <= until_s + 1e-9:
        tick += 1
        t = tick * TICK_S
        bench.advance(t)
        samples += bench.samples(t)
        if speed is not None:
            bench.command_rotors(t, speed)
        if position is not None:
            bench.command_carrier(t, position, np.zeros(axes))
    return samples


def crossings(t: np.ndarray, x: np.ndarray) -> np.ndarray:
    """Return times at which ``x`` passes zero, by a cubic through the four points round each."""
    times = []
    for i in np.nonzero(np.sign(x[1:-2]) * np.sign(x[2:-1]) < 0)[0] + 1:
        cubic = np.polyfit(t[i - 1:i + 3] - t[i], x[i - 1:i + 3], 3)
        roots = np.roots(cubic)
        real = roots[np.abs(roots.imag) < 1e-9].real
        times.append(t[i] + real[np.argmin(np.abs(real - 0.5 * (t[i + 1] - t[i])))])
    return np.array(times)


def traced(plant: Plant, seconds: float) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Step for a while; times, positions with quaternions, velocities with rates."""
    count = round(seconds / plant.step_s)
    qpos, qvel = np.empty((count + 1, 7)), np.empty((count + 1, 6))
    for i in range(count + 1):
        qpos[i], qvel[i] = plant.qpos, plant.qvel
        if i < count:
            plant.step()
    return np.arange(count + 1) * plant.step_s, qpos, qvel


def _frozen(changes: dict) -> dict:
    return {key: frozen(value) if isinstance(value, (tuple, list)) else value
            for key, value in changes.items()}


__all__ = ['BAY_HEAD', 'SEAM_HEAD', 'TICK_S', 'crossings', 'exact_bench', 'free_plant', 'ideal',
           'k', 'moving', 'quiet_imu', 'quiet_pose', 'run', 'traced', 'with_body', 'with_sensors',
           'with_tether']
