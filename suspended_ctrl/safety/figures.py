"""The figures that go with an event: what was measured, what is allowed, where a cut swings to."""

from suspended_ctrl.physics.rotation import rotate
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety import rows
from suspended_ctrl.safety.arrivals import Arrivals
from suspended_ctrl.safety.limits import Limit
from suspended_ctrl.safety.swing import predict_cut

Values = tuple[tuple[str, float], ...]


def limit_figures(rig: Rig, seen: Arrivals, index: int, limit: Limit, share: float) -> Values:
    """
    Say by how much a limit is broken.

    Parameters
    ----------
    rig : Rig
        What the hardware is.
    seen : Arrivals
        What has reached the supervisor.
    index : int
        Row of the limit.
    limit : Limit
        The limit itself.
    share : float
        Of the limit that is used.

    Returns
    -------
    tuple of (str, float)
        Units in the names.

    """
    figure = limit.limit / share if limit.lower else limit.limit * share
    values: Values = ((f'measured_{limit.unit}', figure), (f'limit_{limit.unit}', limit.limit))
    if index == rows.ROTOR_NOT_FOLLOWING:
        rotors = seen.rotors
        name = rig.rotors.names[rotors.worst]
        values += ((f'{name}_measured_rad_s', float(rotors.measured_rad_s[rotors.worst])),
                   (f'{name}_expected_rad_s', float(rotors.expected_rad_s[rotors.worst])))
    return values


def cut_figures(rig: Rig, seen: Arrivals) -> Values:
    """
    Swing that a cut leaves behind, as far as the last odometry knows.

    Parameters
    ----------
    rig : Rig
        What the hardware is.
    seen : Arrivals
        What has reached the supervisor.

    Returns
    -------
    tuple of (str, float)
        Empty before the first odometry.

    """
    motion, anchor = seen.motion, seen.anchor.anchor
    if not seen.motion_known:
        return ()
    thrust = rotate(motion[6:10], seen.rotors.thrust_body_n)
    swing = predict_cut(rig, motion[:3], motion[3:6], anchor[:3], thrust)
    return (('swing_radius_m', swing.radius_m),
            *((f'swing_{axis}_{end}_m', float(box[k]))
              for end, box in (('min', swing.lower_map_m), ('max', swing.upper_map_m))
              for k, axis in enumerate('xyz')),
            ('swing_tension_min_n', swing.tension_min_n),
            ('swing_tension_max_n', swing.tension_max_n),
            ('swing_leaves_keep_in', float(swing.leaves_keep_in)))
