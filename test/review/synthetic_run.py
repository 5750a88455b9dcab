"""A made-up but plausible run, for tests that need a whole log."""

from functools import cache

import numpy as np

from suspended_ctrl.mission.file import load_mission
from suspended_ctrl.mission.timing import timed
from suspended_ctrl.physics.equilibrium import anchor_at_zero
from suspended_ctrl.physics.lead import PlatformState
from suspended_ctrl.physics.rotation import exponential, multiply
from suspended_ctrl.physics.rotor import RotorModel
from suspended_ctrl.physics.tether import tether_wrench
from suspended_ctrl.physics.values import (
    CarrierCommand,
    CarrierPlan,
    CarrierSample,
    Estimate,
    ImuSample,
    Payload,
    PayloadEvent,
    PoseSample,
    RotorCommand,
    RotorSample,
    TetherLoadSample,
    Wrench,
)
from suspended_ctrl.review.log import RunFacts, RunLog
from suspended_ctrl.review.messages import Diagnostics, NodeStatus
from suspended_ctrl.review.topics import JointNames

GRAVITY = np.array([0.0, 0.0, -9.80665])


def names_of(rig):
    return JointNames(rig.rotors.names, rig.carrier.axes)


@cache
def synthetic_run(mission='panel_pass_1p0', until_s=None, trip_at_s=None, seed=0):
    """
    Make a log at the rates of a real one: 200 Hz ticks, 400 Hz IMU, 10 Hz plans.

    The platform is 2 mm beside its reference, wandering slowly, and turned by 10 mrad. The same
    arguments give the same log, which tests share and leave as it is.
    """
    rng = np.random.default_rng(seed)
    mission = load_mission(mission)
    plan = timed(mission)
    rig = mission.rig
    start_s = 2.0
    reference = plan.reference.starting_at(start_s)
    end_s = min(reference.end_s + 1.0, until_s or np.inf)
    log = RunLog(RunFacts(
        mission='panel_pass_1p0', rig=rig.name, seed=seed, law='computed_torque',
        allocator='priority_qp', path_start_s=start_s + plan.path_start_s,
        path_end_s=min(start_s + plan.path_end_s, end_s), wall_s=4.0,
        tick_wall_s=rng.gamma(8.0, 25e-6, 4000), plan_wall_s=rng.gamma(8.0, 2e-4, 300)))
    model = RotorModel(rig.rotors, rig.body.centre_of_mass_m)
    inverse = np.linalg.pinv(model.wrench_per_thrust)
    anchor_zero = anchor_at_zero(rig)
    carrier = np.zeros(3)
    zero = np.zeros(3)
    covariance = np.diag([1e-7] * 3 + [1e-6] * 3 + [1e-5] * 3 + [1e-4] * 3)
    turned = exponential(np.array([0.006, 0.008, 0.0]))
    log.append('reference', start_s - 0.5, reference)
    log.append('payload_event', start_s, PayloadEvent(start_s, 0.0))
    states = [(0.0, 'locked'), (0.6, 'ready'), (1.2, 'live')]
    live_until = end_s if trip_at_s is None else start_s + plan.path_start_s + trip_at_s
    if trip_at_s is not None:
        states.append((live_until, 'tripped'))
        log.facts.fault_s = live_until - 0.050
        log.facts.ended = 'tripped: pose silent for 0.10 s'
    for t, state in states:
        log.append('safety/state', t, state)
    ticks = np.arange(0.0, end_s, 0.005)
    for k, t in enumerate(ticks.tolist()):
        point = reference.at(t)
        cut = t >= live_until
        wander = 0.002 * np.array([np.cos(0.9 * t), np.sin(0.9 * t), 0.3 * np.sin(2.1 * t)])
        if cut:
            wander = wander + np.array([0.3 * (1 - np.exp(live_until - t)), 0, 0])
        position = point.position_map_m + wander
        quaternion = multiply(point.quaternion_wxyz, turned)
        velocity = point.velocity_map_m_s
        carrier = carrier + 0.005 * np.clip(
            0.8 * (position - anchor_zero)[:3] * [1, 1, 0] - 0.8 * carrier, -0.3, 0.3)
        anchor = anchor_zero + carrier
        pull = tether_wrench(rig.tether, rig.body.centre_of_mass_m, position, velocity, quaternion,
                             zero, anchor, zero)
        wanted = np.concatenate((
            rig.body.mass_kg * (point.acceleration_map_m_s2 - GRAVITY), zero))
        thrust = np.clip(inverse @ (wanted - pull[:6]) + 4.0, model.thrust_min_n,
                         model.thrust_max_n)
        speed = model.speed_for_thrust(thrust)
        live = 1.2 <= t < live_until
        speed = speed if live else np.zeros(rig.rotors.count)
        measured = speed * (1 + 0.01 * rng.normal(size=len(speed)))
        stamp = t - 0.008
        log.append('pose', t, PoseSample(stamp, position, quaternion))
        log.append('rotor_states', t, RotorSample(t, measured))
        log.append('ground_truth', t, PlatformState(t, position, velocity, quaternion, zero))
        log.append('odometry', t, Estimate(
            t, position + rng.normal(size=3) * 3e-4, velocity + rng.normal(size=3) * 3e-3,
            multiply(quaternion, exponential(rng.normal(size=3) * 1e-3)), zero, covariance,
            np.array([1.0, 0.5, -1.8]), zero, Payload(), stamp, True))
        log.append('wrench_demand', t, Wrench(stamp, wanted[:3], wanted[3:]))
        log.append('wrench_achieved', t, Wrench(stamp, wanted[:3], wanted[3:]))
        log.append('rotor_demand', t, RotorCommand(stamp, speed))
        log.append('rotor_command', t, RotorCommand(stamp, speed))
        log.append('carrier_demand', t, CarrierCommand(stamp, carrier, zero))
        log.append('carrier_command', t, CarrierCommand(stamp, carrier, zero))
        for i in range(2):
            log.append('imu', t + i * 0.0025, ImuSample(
                t + i * 0.0025, rng.normal(size=3) * 0.005, -GRAVITY + rng.normal(size=3) * 0.05))
        if k % 4 == 0:
            log.append('carrier_states', t, CarrierSample(t, carrier, zero))
            log.append('ground_truth_tether', t, TetherLoadSample(t, float(pull[6])))
            log.append('ground_truth_rotors', t, RotorSample(t, speed))
        if k % 10 == 0:
            log.append('emergency_stop', t, False)
        if k % 20 == 0:
            log.append('carrier_plan', t, CarrierPlan(
                stamp, 0.1 * np.arange(1, 21), np.tile(carrier, (20, 1)), np.zeros((20, 3))))
        if k % 200 == 0:
            log.append('/diagnostics', t, Diagnostics(t, (
                NodeStatus('state_estimator', 0, 'ok', {'nis_pose': '5.9'}),)))
        if trip_at_s is not None and abs(t - live_until) < 0.0025:
            log.add_event(live_until, 'pose silent for 0.10 s', 0)
    return log, rig
