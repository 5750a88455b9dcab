"""MuJoCo's free body under the bench's rotors, held to theory, Newton-Euler and pinocchio."""

from bench_rigs import (
    BAY_HEAD,
    free_plant,
    ideal,
    k,
    moving,
    SEAM_HEAD,
    with_body,
    with_tether,
)
import numpy as np
import pinocchio
import pytest
from scipy.integrate import solve_ivp
from scipy.spatial.transform import Rotation

from suspended_ctrl.bench.plant import Plant
from suspended_ctrl.bench.values import Start
from suspended_ctrl.physics.rigid_body import acceleration, point_velocity
from suspended_ctrl.physics.rotation import rotate
from suspended_ctrl.physics.rotor import RotorModel
from suspended_ctrl.physics.tether import tether_wrench
from suspended_ctrl.physics.values import Payload
from suspended_ctrl.rig.rig import Rig

G = 9.80665


def top(moments) -> Plant:
    return free_plant(ideal(BAY_HEAD, 10.0, 1000.0, 3.0, np.diag(moments).tolist()))


def test_free_fall_is_uniformly_accelerated():
    plant = free_plant(ideal(BAY_HEAD, 6.2, 74.0, 2.9))
    start = plant.qpos.copy()
    moving(plant, velocity=(0.3, -0.2, 1.0))
    for _ in range(400):
        plant.step()
    # A fourth-order method is exact on a parabola: what is left is rounding.
    expected = start[:3] + np.array((0.3, -0.2, 1.0)) - np.array((0.0, 0.0, 0.5 * G))
    np.testing.assert_allclose(plant.qpos[:3], expected, atol=1e-11)
    np.testing.assert_allclose(plant.truth().acceleration_map_m_s2, (0, 0, -G), atol=1e-10)


def test_symmetric_top_precesses_in_its_body_as_euler_says():
    # Goldstein, Poole, Safko, Classical Mechanics, 3rd ed., section 5.6 (from memory):
    # rate (I3 - I1) / I1 * w3 = 1.5 rad/s. Values at 7.3 s from the closed form.
    plant = top((1.0, 1.0, 1.5))
    moving(plant, rate=(0.1, 0.0, 3.0))
    for _ in range(2920):
        plant.step()
    # Local error of the step to the fifth power, over 7.3 s: 7e-10 when this was written.
    np.testing.assert_allclose(plant.qvel[3:], (-0.0045559, -0.0998962, 3.0), atol=1e-7)


def test_symmetric_top_precesses_in_space_about_its_angular_momentum():
    # The same; rate |L| / I1 = 1.044031 rad/s for I = (1, 1, 0.5), w = (0.3, 0, 2).
    plant = top((1.0, 1.0, 0.5))
    moving(plant, rate=(0.3, 0.0, 2.0))
    momentum = np.array((0.3, 0.0, 1.0))
    seconds = 4.0
    for _ in range(1600):
        plant.step()
    axis = Rotation.from_quat(plant.qpos[3:], scalar_first=True).apply((0.0, 0.0, 1.0))
    turn = Rotation.from_rotvec(momentum / np.linalg.norm(momentum) * 1.044031 * seconds)
    # The rate is given to 5e-7, over 4 s.
    np.testing.assert_allclose(axis, turn.apply((0.0, 0.0, 1.0)), atol=2e-6)


def random_speeds(rig: Rig, count: int) -> np.ndarray:
    rotors = rig.rotors
    least = np.where(rotors.reversible, -rotors.speed_max_rad_s, rotors.speed_min_rad_s)
    speeds = np.random.default_rng(3).uniform(least, rotors.speed_max_rad_s,
                                              (count, rotors.count))
    return np.where(np.abs(speeds) < rotors.speed_min_rad_s, rotors.speed_min_rad_s, speeds)


class RotorHistory:
    """Exact speeds of rotors whose commands change every 50 ms."""

    def __init__(self, rig: Rig, commands: np.ndarray) -> None:
        self.tau, self.commands = rig.rotors.time_constant_s, commands
        self.at = [np.zeros(rig.rotors.count)]
        for command in commands:
            self.at.append(command + (self.at[-1] - command) * np.exp(-0.05 / self.tau))

    def __call__(self, t: float, i: int) -> tuple[np.ndarray, np.ndarray]:
        gone = self.commands[i] - self.at[i]
        left = gone * np.exp(-(t - 0.05 * i) / self.tau)
        return self.commands[i] - left, left / self.tau


def integrated(start: np.ndarray, history: RotorHistory, derivative) -> np.ndarray:
    """State after all of the commands: position, velocity, quaternion, rate."""
    state = start
    for i in range(len(history.commands)):
        state = solve_ivp(lambda t, x, i=i: derivative(x, *history(t, i)),
                          (0.05 * i, 0.05 * (i + 1)), state, rtol=1e-9, atol=1e-10).y[:, -1]
    return state


def quaternion_rate(q, w) -> np.ndarray:
    return 0.5 * np.array((-q[1] * w[0] - q[2] * w[1] - q[3] * w[2],
                           q[0] * w[0] + q[2] * w[2] - q[3] * w[1],
                           q[0] * w[1] - q[1] * w[2] + q[3] * w[0],
                           q[0] * w[2] + q[1] * w[1] - q[2] * w[0]))


def newton_euler(rig: Rig, wrench):
    """Take the derivative by this project's Newton-Euler equations, of the centre of mass."""
    body = rig.body
    inverse = np.ascontiguousarray(np.linalg.inv(body.inertia_kg_m2))

    def derivative(x, speed, speed_rate):
        x = np.ascontiguousarray(x)
        out = acceleration(body.mass_kg, body.inertia_kg_m2, inverse, x[6:10], x[10:13],
                           wrench(x, speed, speed_rate))
        return np.concatenate((x[3:6], out[:3], quaternion_rate(x[6:10], x[10:13]), out[3:]))
    return derivative


def by_pinocchio(rig: Rig, wrench):
    """Take the derivative by pinocchio's articulated-body algorithm, free flyer at the centre."""
    body = rig.body
    model = pinocchio.Model()
    model.gravity.linear = np.array((0.0, 0.0, -G))
    joint = model.addJoint(0, pinocchio.JointModelFreeFlyer(), pinocchio.SE3.Identity(), 'free')
    model.appendBodyToJoint(joint, pinocchio.Inertia(
        body.mass_kg, np.zeros(3), np.array(body.inertia_kg_m2)), pinocchio.SE3.Identity())
    data = model.createData()

    def derivative(x, speed, speed_rate):
        turn = pinocchio.Quaternion(*x[6:10]).normalized().matrix()
        q = np.concatenate((x[:3], x[7:10], x[6:7]))
        v = np.concatenate((turn.T @ x[3:6], x[10:13]))
        a = pinocchio.aba(model, data, q, v, wrench(np.ascontiguousarray(x), speed, speed_rate))
        # Pinocchio's acceleration is spatial: that of the point lacks rate times velocity.
        linear = turn @ (a[:3] + np.cross(v[3:], v[:3]))
        return np.concatenate((x[3:6], linear, quaternion_rate(x[6:10], x[10:13]), a[3:]))
    return derivative


def driven(plant: Plant, commands: np.ndarray) -> np.ndarray:
    for i, command in enumerate(commands):
        plant.command_rotors(0.05 * i, command)
        for _ in range(round(0.05 / plant.step_s)):
            plant.step()
    return np.concatenate((plant.qpos[:3], plant.qvel[:3], plant.qpos[3:], plant.qvel[3:]))


def seen_at_origin(rig: Rig, x: np.ndarray) -> np.ndarray:
    centre = np.array(rig.body.centre_of_mass_m)
    x = np.ascontiguousarray(x)
    velocity = point_velocity(x[3:6], x[6:10], x[10:13], -centre)
    return np.concatenate((x[:3] - rotate(x[6:10], centre), velocity, x[6:]))


@pytest.mark.parametrize(('rig', 'hung'), [(BAY_HEAD, True), (SEAM_HEAD, False)],
                         ids=['bay_head hung', 'seam_head free'])
def test_plant_newton_euler_and_pinocchio_agree_under_random_rotor_speeds(rig, hung):
    """
    Half a second of random commands on an off-centre, skew body, three times.

    The bench's rotor, tether and MuJoCo code against this project's equations, and those
    against pinocchio's with the same wrenches.
    """
    rig = with_body(rig, centre_of_mass_m=(0.01, -0.02, 0.005), drag_area_m2=(0.0, 0.0, 0.0),
                    inertia_kg_m2=((0.17, 0.01, -0.006), (0.01, 0.16, 0.02), (-0.006, 0.02, 0.21)))
    rig = with_tether(rig, mass_kg=0.0, damping_n_s_per_m=0.0)
    centre = np.array(rig.body.centre_of_mass_m)
    model = RotorModel(rig.rotors, centre)
    commands = random_speeds(rig, 10)
    history = RotorHistory(rig, commands)
    anchor = rig.carrier.anchor_m

    def wrench(x, speed, speed_rate):
        total = model.wrench(speed, speed_rate, x[10:13])
        if hung:
            origin = seen_at_origin(rig, x)
            total = total + tether_wrench(rig.tether, centre, origin[:3], origin[3:6],
                                          origin[6:10], origin[10:13], anchor, np.zeros(3))[:6]
        return total

    def plant(step_s):
        made = Plant(rig, step_s, Start()) if hung else free_plant(rig, step_s)
        moving(made, rate=(0.3, -0.5, 0.8))
        return made

    coarse, fine = plant(0.0025), plant(0.00125)
    turn = Rotation.from_quat(coarse.qpos[3:], scalar_first=True)
    arm = turn.apply(centre)
    start = np.concatenate((coarse.qpos[:3] + arm, turn.apply(np.cross((0.3, -0.5, 0.8), centre)),
                            coarse.qpos[3:], coarse.qvel[3:]))
    ours = integrated(start, history, newton_euler(rig, wrench))
    theirs = integrated(start, history, by_pinocchio(rig, wrench))
    # The same equations twice, integrated to 1e-9 a step.
    np.testing.assert_allclose(ours, theirs, atol=1e-6)

    expected = seen_at_origin(rig, ours)
    error = np.abs(driven(coarse, commands) - expected)
    finer = np.abs(driven(fine, commands) - expected)
    # Forces held over a step cost the square of the step: up to 1e-3 rad/s of several rad/s.
    assert error.max() < 2e-3
    assert finer.max() < 0.3 * error.max()


def test_payload_changes_mass_centre_and_inertia():
    """Free body with a point mass hung on, pushed at its centre: Steiner's theorem by hand."""
    rig = with_body(ideal(BAY_HEAD, 6.2, 74.0, 2.9), inertia_kg_m2=np.diag(
        (0.17, 0.16, 0.21)).tolist())
    plant = free_plant(rig)
    plant.set_payload(Payload(0.6, np.array((0.1, 0.0, -0.25))))
    mass = 6.8
    centre = 0.6 / mass * np.array((0.1, 0.0, -0.25))
    reduced = 6.2 * 0.6 / mass
    np.testing.assert_allclose(plant.fixed[k.CENTRE:k.CENTRE + 3], centre, atol=1e-12)
    # A rotor-like torque is not at hand; spin about y with no force keeps the centre in free
    # fall, so the origin swings round it.
    moving(plant, velocity=-np.cross((0.0, 2.0, 0.0), centre), rate=(0.0, 2.0, 0.0))
    origin = plant.qpos[:3].copy()
    for _ in range(400):
        plant.step()
    turn = Rotation.from_quat(plant.qpos[3:], scalar_first=True)
    fallen = origin + centre - (0.0, 0.0, 0.5 * G)
    np.testing.assert_allclose(plant.qpos[:3] + turn.apply(centre), fallen, atol=1e-9)
    # The spin about y stays, its axis being principal: x-z products alone are not zero.
    np.testing.assert_allclose(plant.qvel[3:], (0.0, 2.0, 0.0), atol=1e-9)

    # Inertia: a push of 1 N at the origin's own place would turn it; the drag-free rotors do.
    moving(plant)
    inertia = np.diag((0.17, 0.16, 0.21)) + reduced * (
        0.1 ** 2 + 0.25 ** 2) * np.eye(3) - reduced * np.outer((0.1, 0, -0.25), (0.1, 0, -0.25))
    model = RotorModel(rig.rotors, centre)
    speed = np.linspace(200.0, 900.0, 8)
    plant.rotor[k.SPEED] = plant.rotor[k.TARGET] = plant.rotor[k.NEXT] = speed
    plant.rotor[k.SPEED] = speed
    plant.step()
    torque = model.wrench(speed, np.zeros(8), np.zeros(3))[3:]
    # From rest: the gyroscopic terms have had no time, 0.0025 s of about 100 rad/s^2.
    np.testing.assert_allclose(plant.qvel[3:] / plant.step_s, np.linalg.solve(inertia, torque),
                               rtol=2e-3, atol=0.02)
