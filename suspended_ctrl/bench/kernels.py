"""
The true drives and the forces that MuJoCo does not know, for one plant step.

Written for the bench alone: nothing here comes from the equations that the controller works with.
State that changes from step to step stands in rows of matrices, numbered below.
"""

from numba import types
import numpy as np

from suspended_ctrl.physics.kernel import kernel, MATRIX, OUT_MATRIX, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.physics.rotation import cross, exponential, multiply, rotate, rotate_back
from suspended_ctrl.rig.frozen import Array

# Rows of ``rotor``, a column a rotor. The drive goes to TARGET, from the switch time on to NEXT.
SPEED, TARGET, NEXT, ROTOR_MODE, WEAKNESS, THRUST = range(6)
ROTOR_ROWS = 6
RUNS, DEAD, STUCK = 0.0, 1.0, 2.0

# Columns of ``rotor_fixed``, a row a rotor; position takes 0 to 2, axis 3 to 5.
TORQUE_COEFFICIENT, SPIN, TIME_CONSTANT, INERTIA = 6, 7, 8, 9
ROTOR_COLUMNS = 10

# Rows of ``carrier``, a column an axis.
POSITION, VELOCITY, SETPOINT, AXIS_MODE, RUNAWAY = range(5)
CARRIER_ROWS = 5
FOLLOWS, STOPS, RUNS_AWAY = 0.0, 1.0, 2.0

# Columns of ``carrier_fixed``, a row an axis; direction takes 0 to 2.
LOWER, UPPER, SPEED_MAX, ACCELERATION_MAX, AXIS_TIME_CONSTANT = 3, 4, 5, 6, 7
CARRIER_COLUMNS = 8

# Entries of ``fixed``; hook, centre of mass, drag areas and anchor at zero take three each.
STEP, STIFFNESS, REST_LENGTH, DAMPING, AIR_DENSITY = 0, 1, 2, 3, 4
HOOK, CENTRE, DRAG_AREA, ANCHOR_ZERO = 5, 8, 11, 14
FIXED_SIZE = 17

# Entries of ``world``: anchor and its velocity at the step's end, wind and push, all in map.
ANCHOR, ANCHOR_VELOCITY, WIND, PUSH = 0, 3, 6, 9
WORLD_SIZE = 12

# ``before``, as the last step began: ``qvel``, then the quaternion.
BEFORE_SIZE = 10


@kernel(REAL(REAL, REAL, REAL))
def _stoppable(distance: float, acceleration: float, step: float) -> float:
    """
    Fastest end-of-step speed from which an axis still stops within a distance.

    ``distance`` is what is left less half a step at the present speed. Solves
    ``v^2 / (2 a) + v step / 2 = distance``; zero where nothing is left.
    """
    if distance <= 0.0:
        return 0.0
    root: float = np.sqrt(0.25 * step * step + 2.0 * distance / acceleration)
    return acceleration * (root - 0.5 * step)


@kernel(types.void(OUT_MATRIX, MATRIX, REAL))
def move_carrier(carrier: Array, carrier_fixed: Array, step: float) -> None:
    """
    Move each axis for one step: a first-order lag behind its setpoint, inside its limits.

    Position never leaves the travel and speed never changes faster than the limit: whatever the
    setpoint does, the axis keeps a speed from which it stops before the end of its travel.
    """
    for i in range(carrier.shape[1]):
        position, velocity = carrier[POSITION, i], carrier[VELOCITY, i]
        limit = carrier_fixed[i, ACCELERATION_MAX]
        coming = 0.5 * step * velocity
        mode = carrier[AXIS_MODE, i]
        if mode == RUNS_AWAY:
            wanted = carrier[RUNAWAY, i]
        elif mode == STOPS:
            wanted = 0.0
        else:
            error = carrier[SETPOINT, i] - position
            # The lag's speed at the end of the step.
            constant = carrier_fixed[i, AXIS_TIME_CONSTANT]
            wanted = error / constant * np.exp(-step / constant)
            braking = _stoppable(abs(error) - (coming if error > 0.0 else -coming), limit, step)
            fastest = min(carrier_fixed[i, SPEED_MAX], braking)
            wanted = min(max(wanted, -fastest), fastest)
        wanted = min(wanted, _stoppable(carrier_fixed[i, UPPER] - position - coming, limit, step))
        wanted = max(wanted, -_stoppable(position - carrier_fixed[i, LOWER] + coming, limit, step))
        change = limit * step
        speed = min(max(wanted, velocity - change), velocity + change)
        position += 0.5 * step * (velocity + speed)
        # An axis that stops within the step does so on the end of travel, not a little beyond it.
        carrier[POSITION, i] = min(max(position, carrier_fixed[i, LOWER]), carrier_fixed[i, UPPER])
        carrier[VELOCITY, i] = speed


@kernel(REAL(REAL, VECTOR, VECTOR))
def curve_thrust(speed: float, curve_square: Array, thrust: Array) -> float:
    """Thrust of one rotor: linear in squared speed between knots, odd in speed."""
    square = speed * speed
    k = 1
    while k < curve_square.shape[0] - 1 and square > curve_square[k]:
        k += 1
    part = (square - curve_square[k - 1]) / (curve_square[k] - curve_square[k - 1])
    magnitude: float = thrust[k - 1] + part * (thrust[k] - thrust[k - 1])
    return magnitude if speed >= 0.0 else -magnitude


@kernel(OUT_VECTOR(OUT_MATRIX, MATRIX, MATRIX, MATRIX, VECTOR, REAL, REAL))
def turn_rotors(rotor: Array, rotor_fixed: Array, curve_square: Array, thrusts: Array,
                rate_body: Array, step: float, switch: float) -> Array:
    """
    Turn the rotors for one step.

    Speed follows the drive's target by a first-order lag, exactly.

    Parameters
    ----------
    rotor : ndarray, shape (ROTOR_ROWS, n)
        Written: where the step ends.
    rotor_fixed, curve_square, thrusts : ndarray
        As for ``apply_forces``.
    rate_body : ndarray, shape (3,)
        Of the platform, rad/s.
    step : float
        Its length, s.
    switch : float
        When the target becomes NEXT; not in this step if beyond it.

    Returns
    -------
    ndarray, shape (6,)
        Mean force and torque of all rotors on the body, at the origin, ``base_link`` axes.

    """
    wrench = np.zeros(6)
    momentum = np.zeros(3)
    first = min(max(switch, 0.0), step)
    for i in range(rotor.shape[1]):
        start = rotor[SPEED, i]
        mode = rotor[ROTOR_MODE, i]
        end = start
        if mode != STUCK:
            constant = rotor_fixed[i, TIME_CONSTANT]
            before = 0.0 if mode == DEAD else rotor[TARGET, i]
            after = 0.0 if mode == DEAD else rotor[NEXT, i]
            end = before + (start - before) * np.exp(-first / constant)
            if first < step:
                end = after + (end - after) * np.exp(-(step - first) / constant)
        middle = 0.5 * (start + end)
        thrust = rotor[WEAKNESS, i] * curve_thrust(middle, curve_square[i], thrusts[i])
        # The air turns the body against the spin, and so does what spins the rotor up.
        spin = rotor_fixed[i, SPIN]
        twist = -spin * (rotor_fixed[i, TORQUE_COEFFICIENT] * middle * abs(middle)
                         + rotor_fixed[i, INERTIA] * (end - start) / step)
        place = rotor_fixed[i, 0:3]
        axis = rotor_fixed[i, 3:6]
        arm = cross(place, axis)
        for j in range(3):
            wrench[j] += thrust * axis[j]
            wrench[3 + j] += thrust * arm[j] + twist * axis[j]
            momentum[j] += spin * rotor_fixed[i, INERTIA] * middle * axis[j]
        rotor[SPEED, i] = end
        rotor[THRUST, i] = thrust
        if switch < step:
            rotor[TARGET, i] = rotor[NEXT, i]
    gyroscopic = cross(rate_body, momentum)
    for j in range(3):
        wrench[3 + j] -= gyroscopic[j]
    return wrench


@kernel(OUT_VECTOR(VECTOR, VECTOR, VECTOR, VECTOR, VECTOR))
def tether_pull(qpos: Array, qvel: Array, anchor: Array, anchor_velocity: Array,
                fixed: Array) -> Array:
    """
    How the tether pulls the hook.

    Parameters
    ----------
    qpos, qvel, fixed : ndarray
        As for ``apply_forces``.
    anchor, anchor_velocity : ndarray, shape (3,)
        In map.

    Returns
    -------
    ndarray, shape (5,)
        Direction from hook to anchor in map, a unit vector where there is tension; tension; what
        of it damping adds to the spring.

    """
    out = np.zeros(5)
    hook = fixed[HOOK:HOOK + 3]
    arm = rotate(qpos[3:7], hook)
    swept = rotate(qpos[3:7], cross(qvel[3:6], hook))
    length = 0.0
    for i in range(3):
        out[i] = anchor[i] - qpos[i] - arm[i]
        length += out[i] * out[i]
    length = np.sqrt(length)
    stretch = length - fixed[REST_LENGTH]
    if stretch <= 0.0 or fixed[STIFFNESS] == 0.0:
        return out
    rate = 0.0
    for i in range(3):
        out[i] /= length
        rate += out[i] * (anchor_velocity[i] - qvel[i] - swept[i])
    spring = fixed[STIFFNESS] * stretch
    out[3] = max(spring + fixed[DAMPING] * rate, 0.0)
    out[4] = out[3] - spring
    return out


@kernel(types.void(VECTOR, VECTOR, OUT_VECTOR, OUT_MATRIX, OUT_MATRIX, MATRIX, MATRIX, MATRIX,
                   OUT_MATRIX, MATRIX, VECTOR, OUT_VECTOR, OUT_VECTOR, REAL))
def apply_forces(qpos: Array, qvel: Array, force: Array, anchor: Array, rotor: Array,
                 rotor_fixed: Array, curve_square: Array, thrusts: Array, carrier: Array,
                 carrier_fixed: Array, fixed: Array, world: Array, before: Array,
                 switch: float) -> None:
    """
    Move the drives through the coming step and set the forces that act during it.

    They are those halfway through the step, to which place and velocity are led by the velocity
    and by the last step's change of velocity.

    Parameters
    ----------
    qpos, qvel : ndarray, shapes (7,), (6,)
        As the step begins.
    force : ndarray, shape (6,)
        Written: force in map and torque in ``base_link`` axes, both at the origin.
    anchor : ndarray, shape (1, 3)
        Written: the anchor halfway through the step.
    rotor, rotor_fixed, carrier, carrier_fixed, fixed, world, before : ndarray
        As numbered above; written: rotor, carrier, world, before.
    curve_square, thrusts : ndarray, shape (n, m)
        Knots of each rotor's thrust curve over squared speed.
    switch : float
        When in the step the rotors' targets change, s.

    """
    step = fixed[STEP]
    velocity = 1.5 * qvel - 0.5 * before[:6]
    place = np.empty(7)
    for j in range(3):
        place[j] = qpos[j] + 0.5 * step * qvel[j]
    halfway = multiply(qpos[3:7], exponential(0.5 * step * qvel[3:6]))
    place[3:7] = halfway
    before[:6] = qvel
    before[6:10] = qpos[3:7]

    departed = np.copy(carrier[POSITION])
    move_carrier(carrier, carrier_fixed, step)
    middle_anchor = np.empty(3)
    anchor_velocity = np.zeros(3)
    for j in range(3):
        at, middle, final = fixed[ANCHOR_ZERO + j], fixed[ANCHOR_ZERO + j], 0.0
        for i in range(carrier.shape[1]):
            along = carrier_fixed[i, j]
            at += along * carrier[POSITION, i]
            middle += 0.5 * along * (departed[i] + carrier[POSITION, i])
            anchor_velocity[j] += along * (carrier[POSITION, i] - departed[i]) / step
            final += along * carrier[VELOCITY, i]
        world[ANCHOR + j] = at
        world[ANCHOR_VELOCITY + j] = final
        middle_anchor[j] = middle
        anchor[0, j] = middle
    wrench = turn_rotors(rotor, rotor_fixed, curve_square, thrusts, velocity[3:6], step, switch)

    # Drag in body axes, at the origin.
    through_air = rotate_back(halfway, velocity[:3] - world[WIND:WIND + 3])
    airspeed = np.sqrt(through_air[0] ** 2 + through_air[1] ** 2 + through_air[2] ** 2)
    for j in range(3):
        wrench[j] -= 0.5 * fixed[AIR_DENSITY] * fixed[DRAG_AREA + j] * airspeed * through_air[j]

    pull = tether_pull(place, velocity, middle_anchor, anchor_velocity, fixed)
    damping = pull[4] * pull[:3]
    push = world[PUSH:PUSH + 3]
    force_map = rotate(halfway, wrench[:3])
    push_torque = cross(fixed[CENTRE:CENTRE + 3], rotate_back(halfway, push))
    damping_torque = cross(fixed[HOOK:HOOK + 3], rotate_back(halfway, damping))
    for j in range(3):
        force[j] = force_map[j] + push[j] + damping[j]
        force[3 + j] = wrench[3 + j] + push_torque[j] + damping_torque[j]
