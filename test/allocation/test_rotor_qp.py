"""The rotor problem against a second solver, and what it keeps beyond the rotors' reach."""

import cvxpy as cp
import numpy as np
import pytest

from suspended_ctrl.allocation.rotor_problem import build_rotor_problem
from suspended_ctrl.allocation.rotor_qp import RotorQp
from suspended_ctrl.physics.rotor import RotorModel
from suspended_ctrl.rig.file import load_rig

# Three digits below what is asked of the objective.
CLARABEL = {'solver': cp.CLARABEL, 'tol_gap_abs': 1e-10, 'tol_gap_rel': 1e-10, 'tol_feas': 1e-10}


@pytest.fixture(name='case', params=['bay_head', 'seam_head'], scope='module')
def _case(request):
    rig = load_rig(request.param)
    model = RotorModel(rig.rotors, rig.body.centre_of_mass_m)
    return model, RotorQp(model.wrench_per_thrust)


def drawn(rng, model):
    """Bounds and rest as in a tick: reversible rotors on either side of their band."""
    least = model.thrust(model.rotors.speed_min_rad_s)
    sense = np.where(model.rotors.reversible, rng.choice([-1.0, 1.0], len(least)), 1.0)
    ends = sense * least, sense * model.thrust_max_n
    lower, upper = np.minimum(*ends), np.maximum(*ends)
    along = rng.normal(size=3) * 0.1 + [0, 0, 1]
    return lower, upper, ends[0], along / np.linalg.norm(along)


def split(wrench, along):
    """Kept wrench, unit vector of the force across the tether, its size."""
    held = along * (along @ wrench[:3])
    across = wrench[:3] - held
    size = np.linalg.norm(across)
    return np.concatenate((held, wrench[3:])), across / size, size


# Thrusts inside their bounds give wrenches inside reach; four times as much lies outside.
@pytest.mark.parametrize('scale', [1.0, 4.0])
def test_agrees_with_clarabel(case, scale):
    model, qp = case
    rng = np.random.default_rng(11)
    problem = build_rotor_problem(model.wrench_per_thrust)
    parameters = problem.param_dict
    for _ in range(30):
        lower, upper, rest, along = drawn(rng, model)
        wrench = scale * model.wrench_per_thrust @ rng.uniform(lower, upper)
        answer = qp.solve(wrench, along, lower, upper, rest)
        kept, direction, size = split(wrench, along)
        for name, value in (('kept', kept), ('direction', direction), ('lateral_wanted', size),
                            ('lower', lower), ('upper', upper), ('rest', rest)):
            parameters[name].value = value
        expected = problem.solve(**CLARABEL)
        solution = answer.solution
        # The bounds that the allocator is built for.
        assert solution.objective == pytest.approx(expected, rel=1e-6)
        assert max(solution.primal_residual, solution.dual_residual, solution.gap) <= 1e-7
        assert (solution['thrust'] >= lower - 1e-9).all()
        assert (solution['thrust'] <= upper + 1e-9).all()
        assert (answer.thrust_n >= lower).all()
        assert (answer.thrust_n <= upper).all()


def test_force_across_the_tether_takes_the_whole_deficit(case):
    model, qp = case
    rng = np.random.default_rng(12)
    short = 0
    for _ in range(60):
        lower, upper, rest, along = drawn(rng, model)
        inside = model.wrench_per_thrust @ rng.uniform(lower, upper)
        # Torque and tension that can be kept, with more force across than there is.
        _, direction, size = split(inside, along)
        wanted = 5.0 * size
        wrench = inside + np.append((wanted - size) * direction, np.zeros(3))
        thrust = qp.solve(wrench, along, lower, upper, rest).thrust_n
        given = model.wrench_per_thrust @ thrust
        torque_error = np.linalg.norm(given[3:] - wrench[3:])
        assert torque_error <= 0.01 * np.linalg.norm(wrench[3:])
        # A newton's price buys 1 / (2 * 100) N of error along the tether at the price's lever.
        assert abs(along @ (given[:3] - wrench[:3])) <= 0.05
        across = given[:3] - along * (along @ given[:3])
        reached = np.linalg.norm(across)
        # Below a newton an error of 5 mN would no more be a direction.
        if reached > 1.0:
            angle = np.degrees(np.arccos(min(across @ direction / reached, 1.0)))
            assert angle <= 5.0
        # What could be had is not left lying: the point it was made from gives this much.
        assert reached >= size - 0.05
        short += reached < wanted - 0.1
    assert short >= 30


def test_dead_rotor_is_left_out(case):
    model, qp = case
    rng = np.random.default_rng(13)
    for out in range(model.rotors.count):
        lower, upper, rest, along = drawn(rng, model)
        lower[out] = upper[out] = rest[out] = 0.0
        wrench = model.wrench_per_thrust @ (0.5 * (lower + upper))
        thrust = qp.solve(wrench, along, lower, upper, rest).thrust_n
        assert thrust[out] == 0.0
        # Within the others' reach: all but what effort's price of 1e-3 against 1e2 bends.
        np.testing.assert_allclose(model.wrench_per_thrust @ thrust, wrench, atol=0.02)
