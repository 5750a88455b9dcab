"""What the sensors measure, how they err, when their samples arrive."""

from dataclasses import replace

from bench_rigs import (
    BAY_HEAD,
    exact_bench,
    quiet_imu,
    quiet_pose,
    run,
    SEAM_HEAD,
    TICK_S,
    with_sensors,
)
import numpy as np
import pytest
from scipy.spatial.transform import Rotation
from scipy.stats import chi2

from suspended_ctrl.bench.bench import Bench
from suspended_ctrl.bench.mismatch import Mismatch
from suspended_ctrl.bench.plant import Plant
from suspended_ctrl.bench.sensors import ImuInstrument
from suspended_ctrl.bench.step import plant_step_s
from suspended_ctrl.bench.streams import Streams
from suspended_ctrl.bench.values import EmergencyStopSample, Start
from suspended_ctrl.physics.values import (
    CarrierSample,
    ImuSample,
    PoseSample,
    RotorSample,
    TetherLoadSample,
)
from suspended_ctrl.rig.frozen import frozen
from suspended_ctrl.rig.rig import TetherLoadSensor

TWENTY_SECONDS = 20.0
WITH_LOAD_CELL = with_sensors(BAY_HEAD, tether_load=TetherLoadSensor(100.0, 0.3))


def of(samples: list, kind: type) -> list:
    return [sample for sample in samples if type(sample) is kind]


@pytest.fixture(scope='module')
def at_rest():
    """Twenty seconds hanging still, nothing moving but noise; rotors at 500 rad/s cancel out."""
    bench = exact_bench(WITH_LOAD_CELL, seed=7)
    truth = bench.truth()
    return truth, run(bench, TWENTY_SECONDS)


def check_spread(errors: np.ndarray, sigma: float) -> None:
    """
    Hold white noise to its sigma, mean and whiteness.

    Each column's variance inside the 1e-6 chi-square band, the mean inside five of its own
    sigmas, the correlation of neighbours likewise.
    """
    count = len(errors)
    band = chi2.ppf((5e-7, 1 - 5e-7), count - 1) / (count - 1)
    ratio = errors.var(axis=0, ddof=1) / sigma ** 2
    assert np.all((band[0] < ratio) & (ratio < band[1])), ratio
    assert np.all(np.abs(errors.mean(axis=0)) < 5.0 * sigma / np.sqrt(count))
    inner = errors - errors.mean(axis=0)
    neighbours = (inner[1:] * inner[:-1]).mean(axis=0) / inner.var(axis=0)
    assert np.all(np.abs(neighbours) < 5.0 / np.sqrt(count))


def test_pose_noise(at_rest):
    truth, samples = at_rest
    poses = of(samples, PoseSample)
    check_spread(np.array([p.position_map_m for p in poses]) - truth.position_map_m, 0.0003)
    turns = Rotation.from_quat([p.quaternion_wxyz for p in poses], scalar_first=True)
    level = Rotation.from_quat(truth.quaternion_wxyz, scalar_first=True)
    check_spread((level.inv() * turns).as_rotvec(), 0.001)
    assert all(p.quaternion_wxyz[0] > 0.0 for p in poses)


def test_imu_noise(at_rest):
    _, samples = at_rest
    imu = of(samples, ImuSample)
    rate = np.array([i.rate_rad_s for i in imu])
    force = np.array([i.force_m_s2 for i in imu])
    check_spread(rate - rate.mean(axis=0), 0.005)
    check_spread(force - force.mean(axis=0), 0.05)


def test_load_cell_carrier_and_rotor_noise(at_rest):
    truth, samples = at_rest
    tension = np.array([[s.tension_n] for s in of(samples, TetherLoadSample)])
    check_spread(tension - truth.tension_n, 0.3)
    check_spread(np.array([s.position_m for s in of(samples, CarrierSample)]), 0.0005)
    assert all(np.all(s.velocity_m_s == 0.0) for s in of(samples, CarrierSample))
    assert all(np.all(s.speed_rad_s == 0.0) for s in of(samples, RotorSample))
    bench = exact_bench(seed=7)
    run(bench, 1.0, np.full(8, 500.0))
    turning = of(run(bench, 11.0, np.full(8, 500.0)), RotorSample)
    check_spread(np.array([s.speed_rad_s for s in turning]) / 500.0 - 1.0, 0.01)


def test_biases_are_drawn_once_with_the_rigs_figure_as_sigma():
    plant = Plant(BAY_HEAD, 0.0025, Start())
    biases = []
    for seed in range(400):
        streams = Streams(seed)
        biases.append(ImuInstrument(BAY_HEAD.sensors.imu, plant, streams.generator('imu'),
                                    streams.generator('imu_bias')).bias)
    check_spread(np.array(biases)[:, :3], 0.010)
    check_spread(np.array(biases)[:, 3:], 0.10)
    # Constant over a run: its two halves agree within their own noise.
    imu = of(run(exact_bench(seed=3), 10.0), ImuSample)
    force = np.array([i.force_m_s2 for i in imu])
    halves = force[:2000].mean(axis=0) - force[2000:4000].mean(axis=0)
    assert np.all(np.abs(halves) < 5.0 * 0.05 * np.sqrt(2.0 / 2000))
    assert np.abs(force.mean(axis=0) - (0, 0, 9.80665)).max() > 5.0 * 0.05 / np.sqrt(4000)


def test_rates_stamps_and_latencies(at_rest):
    _, samples = at_rest
    for kind, rate in ((PoseSample, 200), (ImuSample, 400), (RotorSample, 200),
                       (CarrierSample, 50), (TetherLoadSample, 100), (EmergencyStopSample, 20)):
        stamps = [s.stamp_s for s in of(samples, kind)]
        late = 0.008 if kind is PoseSample else 0.0
        # Stamps are the moments of measurement, from zero on: exactly, each once.
        np.testing.assert_allclose(stamps, np.arange(len(stamps)) / rate, atol=1e-12)
        assert len(stamps) == int((TWENTY_SECONDS - late) * rate + 1e-6) + 1
    assert not any(s.stop for s in of(samples, EmergencyStopSample))


def test_a_pose_is_handed_out_8_ms_after_its_moment_and_not_before():
    bench = exact_bench()
    arrival = {}
    for tick in range(0, 1000):
        t = 0.0001 * tick
        bench.advance(t)
        for sample in bench.samples(t):
            if type(sample) is PoseSample:
                arrival[sample.stamp_s] = t
    assert len(arrival) == 19
    for stamp, t in arrival.items():
        assert t == pytest.approx(stamp + 0.008, abs=1e-9)


def test_samples_come_in_order_of_arrival_each_once():
    bench = exact_bench(seed=5)
    bench.advance(1.0)
    together = bench.samples(1.0)
    assert bench.samples(1.0) == []
    piecewise = run(exact_bench(seed=5), 1.0)
    assert len(together) == len(piecewise)
    for one, other in zip(together, piecewise, strict=True):
        assert type(one) is type(other)
        assert one.stamp_s == other.stamp_s
    arrivals = [s.stamp_s + (0.008 if type(s) is PoseSample else 0.0) for s in together]
    assert np.all(np.diff(arrivals) > -1e-9)


def swinging(rig) -> Bench:
    bench = exact_bench(rig, start=Start(frozen((0.4, 0.3, 0.1))))
    run(bench, 1.0, np.array((350.0, 200, 170, 170, 170, 170, 200, 300)))
    return bench


def test_imu_feels_its_own_place_and_axes():
    """Specific force and rate against positions of the sensor's own place, differenced twice."""
    place, turn = np.array((0.2, -0.1, 0.15)), Rotation.from_rotvec((0.4, -0.8, 1.1))
    bench = swinging(quiet_imu(BAY_HEAD, position_m=tuple(place),
                               quaternion_wxyz=tuple(turn.as_quat(scalar_first=True))))
    truths, measured = [], []
    step = bench.step_s
    for i in range(81):
        bench.advance(1.0 + i * step)
        measured += of(bench.samples(1.0 + i * step), ImuSample)
        truths.append(bench.truth())
        if i % 2 == 0:
            bench.command_rotors(1.0 + i * step, np.linspace(200.0, 400.0, 8))
    body = Rotation.from_quat([truth.quaternion_wxyz for truth in truths], scalar_first=True)
    points = np.array([truth.position_map_m for truth in truths]) + body.apply(place)
    rates = np.array([truth.rate_body_rad_s for truth in truths])
    assert np.abs(rates).max() > 1.0
    acceleration = (points[2:] - 2.0 * points[1:-1] + points[:-2]) / step ** 2
    felt = (body[1:-1] * turn).inv().apply(acceleration + np.array((0.0, 0.0, 9.80665)))
    force = np.array([sample.force_m_s2 for sample in measured])
    # A sample is the mean over the step that ends at its stamp: two of them round each point.
    # Attitude and acceleration change over 2.5 ms by 1e-3 of a few m/s2.
    np.testing.assert_allclose(0.5 * (force[:-1] + force[1:]), felt, atol=5e-3)
    rate = np.array([sample.rate_rad_s for sample in measured])
    np.testing.assert_allclose(rate, turn.inv().apply(rates[1:]), atol=1e-12)


def test_imu_at_rest_feels_the_tether_and_in_free_fall_nothing():
    rig = quiet_imu(BAY_HEAD)
    bench = exact_bench(rig)
    for sample in of(run(bench, 0.5), ImuSample):
        np.testing.assert_allclose(sample.force_m_s2, (0.0, 0.0, 9.80665), atol=1e-9)
        np.testing.assert_allclose(sample.rate_rad_s, 0.0, atol=1e-9)
    free = replace(rig, body=replace(rig.body, drag_area_m2=frozen((0.0, 0.0, 0.0))))
    bench = exact_bench(free, start=Start(frozen((0.0, 0.0, 1.2))))
    for sample in of(run(bench, 0.25), ImuSample)[1:]:
        np.testing.assert_allclose(sample.force_m_s2, 0.0, atol=1e-9)


def test_pose_is_that_of_the_marker_body():
    place, turn = np.array((0.05, -0.1, 0.2)), Rotation.from_rotvec((0.2, 0.3, -2.0))
    bench = swinging(quiet_pose(BAY_HEAD, position_m=tuple(place), latency_s=0.0,
                                quaternion_wxyz=tuple(turn.as_quat(scalar_first=True))))
    bench.samples(1.0)
    bench.advance(1.005)
    pose = of(bench.samples(1.005), PoseSample)[-1]
    truth = bench.truth()
    body = Rotation.from_quat(truth.quaternion_wxyz, scalar_first=True)
    np.testing.assert_allclose(pose.position_map_m, truth.position_map_m + body.apply(place),
                               atol=1e-12)
    got = Rotation.from_quat(pose.quaternion_wxyz, scalar_first=True)
    assert ((body * turn).inv() * got).magnitude() < 1e-9


def values(samples: list) -> list:
    return [(type(s).__name__, *(np.asarray(getattr(s, name)).tolist()
                                 for name in s.__dataclass_fields__)) for s in samples]


def flown(seed: int, rig=BAY_HEAD, **options) -> tuple[list, np.ndarray]:
    bench = Bench(rig, seed, **options)
    samples = run(bench, 0.6, np.linspace(300.0, 600.0, 8), np.array((0.2, 0.1, 0.0)))
    return values(samples), bench.truth().position_map_m


def test_same_seed_same_run_another_seed_another():
    one, place = flown(1, wind_m_s=2.0)
    again, same_place = flown(1, wind_m_s=2.0)
    assert one == again
    np.testing.assert_array_equal(place, same_place)
    other, other_place = flown(2, wind_m_s=2.0)
    assert one != other
    assert np.all(place != other_place)


def test_switching_one_source_off_changes_no_other():
    one, _ = flown(1, mismatch=Mismatch.none(BAY_HEAD))
    without_imu = with_sensors(BAY_HEAD, imu=None)
    fewer, _ = flown(1, without_imu, mismatch=Mismatch.none(BAY_HEAD))
    assert [s for s in one if s[0] != 'ImuSample'] == fewer
    # The mismatch's draws do not move the noise: at rest both rigs' carriers read alike.
    drawn = [v for v in values(run(Bench(BAY_HEAD, 1), 0.5)) if v[0] == 'CarrierSample']
    none = [v for v in values(run(exact_bench(seed=1), 0.5)) if v[0] == 'CarrierSample']
    assert drawn == none


def test_steps_suit_the_sensors():
    assert plant_step_s(BAY_HEAD) == pytest.approx(0.0025)
    fast = with_sensors(BAY_HEAD, imu=replace(BAY_HEAD.sensors.imu, rate_hz=1000.0))
    assert plant_step_s(fast) == pytest.approx(0.001)
    # 120 and 400 Hz meet at 1200 Hz.
    odd = with_sensors(BAY_HEAD, pose=replace(BAY_HEAD.sensors.pose, rate_hz=120.0))
    assert plant_step_s(odd) == pytest.approx(1.0 / 1200.0)
    # 333 Hz and 400 Hz do not meet within half a millisecond.
    never = with_sensors(BAY_HEAD, pose=replace(BAY_HEAD.sensors.pose, rate_hz=333.0))
    step = plant_step_s(never)
    assert step == pytest.approx(0.0025)
    poses = of(run(exact_bench(never), 1.0 + TICK_S), PoseSample)
    stamps = np.array([p.stamp_s for p in poses])
    late = stamps - np.arange(len(stamps)) / 333.0
    assert np.all((late > -1e-9) & (late < step))
    np.testing.assert_allclose(stamps / step, np.round(stamps / step), atol=1e-6)


def test_seam_head_has_no_carrier_samples():
    assert of(run(exact_bench(SEAM_HEAD), 0.2), CarrierSample) == []


def test_samples_cannot_be_written():
    for sample in run(exact_bench(WITH_LOAD_CELL), 0.1):
        for name in sample.__dataclass_fields__:
            value = getattr(sample, name)
            assert not (isinstance(value, np.ndarray) and value.flags.writeable), (sample, name)
    truth = exact_bench().truth()
    for name in truth.__dataclass_fields__:
        value = getattr(truth, name)
        assert not (isinstance(value, np.ndarray) and value.flags.writeable), name
