"""The carrier's demands inside travel, speed and acceleration, and when plans take effect."""

from dataclasses import replace

from allocator_ticks import TICK_S, Ticks
import numpy as np
import pytest

from suspended_ctrl.allocation.carrier_plan import CarrierPlanner, PERIOD_S, PlanRequest
from suspended_ctrl.physics.path import minimum_jerk, straight
from suspended_ctrl.rig.file import load_rig

LEVEL = np.array([1.0, 0, 0, 0])


@pytest.fixture(name='rig', scope='module')
def _rig():
    return load_rig('bay_head')


@pytest.mark.parametrize('allocator', ['priority_qp', 'horizon_qp'])
def test_demands_keep_the_limits_on_a_move_beyond_them(rig, allocator):
    ticks = Ticks(rig, allocator)
    carrier, start = rig.carrier, ticks.position
    # Faster than the carrier may, and in y beyond its travel of 1.5 m.
    shift = np.array([1.0, 1.9, 0.3])
    path = straight(minimum_jerk(2.5), start, start + shift, LEVEL, LEVEL)
    path = path.starting_at(ticks.t + 0.2)
    place = speed = None
    for k in range(1600):
        ticks.position = path.at(ticks.t).position_map_m
        # Sent once: a path that is over is held at its end.
        out = ticks.step(reference=path if k == 0 else None)
        ticks.plan()
        demand = out.carrier_demand
        assert (demand.position_m >= carrier.min_m).all()
        assert (demand.position_m <= carrier.max_m).all()
        assert (np.abs(demand.velocity_m_s) <= carrier.speed_max_m_s).all()
        if place is not None:
            moved = np.abs(demand.position_m - place)
            # 1e-9: rounding of host time near 100 s.
            assert (moved <= carrier.speed_max_m_s * TICK_S + 1e-9).all()
            change = np.abs(demand.velocity_m_s - speed)
            assert (change <= carrier.acceleration_max_m_s2 * TICK_S + 1e-9).all()
        place, speed = demand.position_m, demand.velocity_m_s
    assert out.diagnostics['fallbacks'] == 0
    # It went: x as far as it was asked, y to the end of its travel, with 5 cm for the tether's
    # lean over the place where the axis stops.
    np.testing.assert_allclose(place[:2], [1.0, 1.5], atol=0.05)


def drawn(rng, carrier):
    """Start well inside travel at a third of full speed; wanted anywhere, outside as well."""
    count = len(carrier.axes)
    setpoint = 0.5 * rng.uniform(carrier.min_m, carrier.max_m)
    speed = rng.uniform(-0.1, 0.1, count)
    wanted = np.cumsum(rng.normal(size=(35, count)) * 0.3, axis=0) + setpoint
    return PlanRequest(50.0, setpoint - 0.25 * speed, speed, setpoint, speed, wanted)


def test_plans_keep_the_limits(rig):
    planner, carrier = CarrierPlanner(rig), rig.carrier
    rng = np.random.default_rng(8)
    busy = 0
    for _ in range(15):
        request = drawn(rng, carrier)
        plan = planner.solve(request)
        assert plan.failure is None
        np.testing.assert_array_equal(plan.setpoint_m[0], request.setpoint_m)
        # The solver keeps rows to 1e-7 at worst; the plan leaves more room than that.
        assert (plan.setpoint_m >= carrier.min_m).all()
        assert (plan.setpoint_m <= carrier.max_m).all()
        assert (np.abs(plan.setpoint_speed_m_s) <= carrier.speed_max_m_s).all()
        assert (np.abs(plan.velocity_m_s) <= carrier.speed_max_m_s + 1e-9).all()
        bend = np.diff(plan.setpoint_speed_m_s, axis=0) / np.diff(plan.time_s)[:, None]
        assert (np.abs(bend) <= carrier.acceleration_max_m_s2).all()
        busy += bool((np.abs(bend) > 0.9 * carrier.acceleration_max_m_s2).any())
    # The limits were felt.
    assert busy >= 10


def test_start_without_a_plan_inside_the_limits_comes_to_rest(rig):
    request = drawn(np.random.default_rng(9), rig.carrier)
    speed = np.array([0.1, 2.0 * rig.carrier.speed_max_m_s[1], 0.0])
    plan = CarrierPlanner(rig).solve(replace(request, setpoint_speed_m_s=speed))
    assert plan.failure is not None
    assert plan.failure.startswith('y')
    # At 0.34 m/s^2 from 0.6 m/s: 1.8 s.
    rest = plan.time_s > 2.0
    np.testing.assert_allclose(plan.setpoint_speed_m_s[rest, 1], 0.0, atol=1e-12)


def test_plan_takes_effect_one_period_after_its_request(rig):
    ticks = Ticks(rig)
    assert ticks.part.plan_request(ticks.t) is None
    ticks.step()
    request, asked = ticks.plan(), ticks.t
    assert request.effect_s == pytest.approx(asked + PERIOD_S, abs=1e-12)
    period = round(PERIOD_S / TICK_S)
    for k in range(1, period):
        assert ticks.step().plan is None, f'tick {k}'
        assert ticks.part.plan_request(ticks.t) is None
    taken = ticks.step()
    assert taken.plan is not None
    assert taken.plan.stamp_s == request.effect_s
    assert ticks.plan() is not None


def test_late_plan_is_counted_and_dropped(rig):
    ticks = Ticks(rig)
    ticks.step()
    answer = ticks.part.solve_plan(ticks.part.plan_request(ticks.t))
    before = ticks.setpoint
    for _ in range(25):
        ticks.step()
    ticks.part.take_plan(answer)
    out = ticks.step()
    assert out.plan is None
    assert out.diagnostics['plans_late'] == 1
    np.testing.assert_array_equal(out.carrier_demand.position_m, before)
