"""The plant's MuJoCo model: free body, unilateral tether, anchor."""

import mujoco
import numpy as np

from suspended_ctrl.physics.values import Payload
from suspended_ctrl.rig.constants import GRAVITY_M_S2
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rig

# MuJoCo wants some inertia in a body that has mass; this of a point is a ten-millionth of the
# smallest platform's.
_POINT_INERTIA_KG_M2 = 1e-9

# Point masses are bodies without joints, which the compiler fuses into the platform: masses are
# combined by MuJoCo. The tether's stiffness is zero up to its rest length; its damping is applied
# as a force, since a tendon's own acts when slack as well. Nothing touches, so no constraints.
_XML = """
<mujoco model="suspended platform">
  <compiler inertiafromgeom="false" balanceinertia="false" fusestatic="true" angle="radian"/>
  <option timestep="{step}" integrator="RK4" jacobian="dense" gravity="0 0 -{gravity}">
    <flag contact="disable" constraint="disable" limit="disable" equality="disable"/>
  </option>
  <worldbody>
    <body name="anchor" mocap="true" pos="{anchor}"><site name="anchor"/></body>
    <body name="base_link">
      <freejoint/>
      <inertial pos="{centre}" mass="{mass}" fullinertia="{inertia}"/>
      <site name="hook" pos="{hook}"/>
      {points}
    </body>
  </worldbody>
  <tendon>
    <spatial name="tether" stiffness="{stiffness}" springlength="0 {length}">
      <site site="anchor"/><site site="hook"/>
    </spatial>
  </tendon>
</mujoco>
"""
_POINT = ('<body pos="{place}"><inertial pos="0 0 0" mass="{mass}" diaginertia="{small} {small} '
          '{small}"/></body>')


def build_model(rig: Rig, payload: Payload, step_s: float) -> mujoco.MjModel:
    """
    Build the model.

    Parameters
    ----------
    rig : Rig
        The true one.
    payload : Payload
        A point mass on the platform; none at zero mass.
    step_s : float
        Of the integration.

    Returns
    -------
    MjModel
        Coordinates: ``qpos`` is position (3) and quaternion (4) of ``base_link``, ``qvel`` is
        linear in map, angular in ``base_link``; tendon 0 is the tether, mocap body 0 the anchor.

    """
    body, tether = rig.body, rig.tether
    inertia = body.inertia_kg_m2
    points = [(tether.mass_kg / 3.0, tether.hook_m), (payload.mass_kg, payload.position_m)]
    # The order of MuJoCo's fullinertia: xx yy zz xy xz yz.
    full = [*np.diag(inertia), inertia[0, 1], inertia[0, 2], inertia[1, 2]]
    return mujoco.MjModel.from_xml_string(_XML.format(
        step=repr(float(step_s)), gravity=GRAVITY_M_S2, anchor=_text(rig.carrier.anchor_m),
        centre=_text(body.centre_of_mass_m), mass=repr(float(body.mass_kg)),
        inertia=_text(np.array(full)), hook=_text(tether.hook_m),
        stiffness=repr(float(tether.stiffness_n_per_m)), length=repr(float(tether.rest_length_m)),
        points=''.join(_POINT.format(place=_text(place), mass=repr(float(mass)),
                                     small=_POINT_INERTIA_KG_M2)
                       for mass, place in points if mass > 0.0)))


def settled(model: mujoco.MjModel, anchor_map_m: Array) -> Array:
    """
    Find where the platform hangs at rest with nothing pushing it.

    Newton's iteration on the accelerations that MuJoCo gives a platform at rest; turning about
    the vertical, which nothing resists, is left alone.

    Parameters
    ----------
    model : MjModel
        From ``build_model``.
    anchor_map_m : ndarray, shape (3,)
        Where the anchor stands.

    Returns
    -------
    ndarray, shape (7,)
        ``qpos`` nearest to level and yaw zero.

    Raises
    ------
    RuntimeError
        If there is no such place, as for a hook at the centre of mass.

    """
    data = mujoco.MjData(model)
    data.mocap_pos[0] = anchor_map_m
    body = model.nbody - 1
    stretch = model.body_mass[body] * GRAVITY_M_S2 / model.tendon_stiffness[0]
    hook = model.site_pos[1]
    place = anchor_map_m - model.body_ipos[body] * (1.0, 1.0, 0.0)
    place[2] -= model.tendon_lengthspring[0, 1] + stretch + hook[2]
    position = np.concatenate((place, (1.0, 0.0, 0.0, 0.0)))
    for _ in range(50):
        residual = _acceleration(model, data, position)
        if np.abs(residual).max() < 1e-10:
            return position
        jacobian = np.empty((6, 6))
        for i in range(6):
            change = 1e-6 * np.eye(6)[i]
            ahead = _acceleration(model, data, _moved(model, position, change))
            behind = _acceleration(model, data, _moved(model, position, -change))
            jacobian[:, i] = (ahead - behind) / 2e-6
        # The turn about the vertical has a singular value of about 1e-9 of the largest.
        step = -np.linalg.pinv(jacobian, rcond=1e-7) @ residual
        position = _moved(model, position, step * min(1.0, 0.2 / np.abs(step).max()))
    raise RuntimeError(f'no equilibrium found, accelerations left {residual}')


def _moved(model: mujoco.MjModel, position: Array, change: Array) -> Array:
    out = position.copy()
    mujoco.mj_integratePos(model, out, change, 1.0)
    return out


def _acceleration(model: mujoco.MjModel, data: mujoco.MjData, position: Array) -> Array:
    data.qpos[:] = position
    data.qvel[:] = 0.0
    mujoco.mj_forward(model, data)
    acceleration: Array = data.qacc.copy()
    return acceleration


def _text(vector: Array) -> str:
    return ' '.join(repr(float(x)) for x in vector)
