"""Rotations against SciPy, transforms3d, the group axioms and published values."""

import numpy as np
from numpy.testing import assert_allclose
import pytest
from scipy.linalg import expm
from scipy.spatial.transform import Rotation

from suspended_ctrl.physics import rotation as rot

from transforms3d.quaternions import qmult, quat2mat

# Rounding of a handful of products of numbers of size one.
EXACT = 1e-14
ANGLES = [0.0, 1e-12, 1e-6, 9.9e-5, 1.01e-4, 1e-3, 0.3, 1.5, 3.0, np.pi - 1e-6, np.pi - 1e-9]


def vectors(angle, count=20, seed=11):
    unit = np.random.default_rng(seed).normal(size=(count, 3))
    return angle * unit / np.linalg.norm(unit, axis=1)[:, None]


def scalar_last(q):
    return np.roll(q, -1)


@pytest.mark.parametrize('angle', ANGLES)
def test_exponential_agrees_with_scipy_and_the_matrix_exponential(angle):
    for phi in vectors(angle):
        q = rot.exponential(phi)
        assert_allclose(rot.matrix(q), Rotation.from_rotvec(phi).as_matrix(), atol=EXACT)
        assert_allclose(rot.matrix(q), expm(rot.skew(phi)), atol=1e-13)
        assert_allclose(rot.matrix(q), quat2mat(q), atol=EXACT)


@pytest.mark.parametrize('angle', ANGLES)
def test_logarithm_undoes_the_exponential(angle):
    # Near pi the sine that carries the axis' length is small, and its rounding counts.
    close = 1e-9 if angle > 3 else 1e-14
    for phi in vectors(angle):
        assert_allclose(rot.logarithm(rot.exponential(phi)), phi, atol=close)
        assert_allclose(rot.logarithm(-rot.exponential(phi)), phi, atol=close)


def test_group_axioms():
    rng = np.random.default_rng(5)
    for p, q, r in rng.normal(size=(50, 3, 4)):
        p, q, r = (rot.normalised(x) for x in (p, q, r))
        assert_allclose(rot.multiply(p, rot.multiply(q, r)), rot.multiply(rot.multiply(p, q), r),
                        atol=EXACT)
        assert_allclose(rot.multiply(p, rot.conjugate(p)), [1, 0, 0, 0], atol=EXACT)
        assert_allclose(rot.multiply(p, q), qmult(p, q), atol=EXACT)
        assert_allclose(rot.matrix(rot.multiply(p, q)), rot.matrix(p) @ rot.matrix(q), atol=EXACT)
        assert_allclose(rot.matrix(-p), rot.matrix(p), atol=EXACT)
        v = rng.normal(size=3)
        assert_allclose(rot.rotate(p, v), rot.matrix(p) @ v, atol=EXACT)
        assert_allclose(rot.rotate_back(p, rot.rotate(p, v)), v, atol=EXACT)
        assert_allclose(rot.rotate(p, v), Rotation.from_quat(scalar_last(p)).apply(v), atol=EXACT)


def test_published_rodrigues_values():
    # Solà, arXiv:1711.02508, section 2.3.3, evaluated for this vector: ten digits.
    m = rot.matrix(rot.exponential(np.array([0.3, -0.5, 0.7])))
    assert_allclose([m[0, 0], m[0, 1], m[2, 2]], [0.6548940285, -0.6770606569, 0.8414377969],
                    atol=1e-10)


def test_third_of_a_turn_about_the_diagonal_permutes_the_axes():
    q = rot.exponential(np.full(3, 2 * np.pi / 3 / np.sqrt(3)))
    assert_allclose(q, [0.5, 0.5, 0.5, 0.5], atol=EXACT)
    assert_allclose(rot.rotate(q, np.array([1.0, 0, 0])), [0, 1, 0], atol=1e-15)


@pytest.mark.parametrize('angle', [0.0, 1e-6, 9e-5, 1.1e-4, 0.3, 2.0])
def test_right_jacobian_is_the_derivative_of_the_exponential(angle):
    step = 1e-6
    for phi in vectors(angle, count=5):
        jacobian = rot.right_jacobian(phi)
        for axis in np.eye(3):
            moved = rot.multiply(rot.conjugate(rot.exponential(phi - step * axis)),
                                 rot.exponential(phi + step * axis))
            # Central difference: error of step squared plus rounding over step.
            assert_allclose(rot.logarithm(moved) / (2 * step), jacobian @ axis, atol=1e-9)
        assert_allclose(rot.right_jacobian_inverse(phi) @ jacobian, np.eye(3), atol=1e-12)


@pytest.mark.parametrize(('degrees', 'length'), [
    # Lee, Leok and McClamroch, CDC 2010: the sine of the angle, whatever the axis.
    (30, 0.5), (90, 1.0), (120, 0.866025403784), (179, 0.017452406437), (180, 0.0)])
def test_attitude_error_length(degrees, length):
    for phi in vectors(np.deg2rad(degrees), count=5):
        desired = rot.exponential(np.array([0.2, -0.4, 0.1]))
        actual = rot.multiply(desired, rot.exponential(phi))
        assert_allclose(np.linalg.norm(rot.attitude_error(actual, desired)), length, atol=1e-12)
        assert_allclose(rot.angle_between(actual, desired), np.deg2rad(degrees), atol=1e-7)


def test_yaw_pitch_roll_agrees_with_scipy():
    for angles in np.random.default_rng(3).uniform(-1.2, 1.2, size=(20, 3)):
        q = rot.from_yaw_pitch_roll(*angles)
        assert_allclose(rot.matrix(q), Rotation.from_euler('ZYX', angles).as_matrix(), atol=EXACT)
        assert_allclose(rot.to_yaw_pitch_roll(q), angles, atol=1e-13)
