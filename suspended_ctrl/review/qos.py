"""Quality of service that each topic is offered with, as recordings keep it."""

_SENSOR = {'pose', 'imu', 'rotor_states', 'carrier_states', 'tether_load', 'ground_truth',
           'ground_truth_tether', 'ground_truth_rotors', 'emergency_stop'}
_LATCHED = {'reference', 'safety/state', 'payload_event'}
# How rosbag2 writes "no limit".
_ENDLESS = {'sec': 9223372036, 'nsec': 854775807}


def offered_qos(topic: str) -> str:
    """
    One profile as YAML, in rosbag2's words.

    Parameters
    ----------
    topic : str
        Name in the graph, without namespace.

    Returns
    -------
    str

    """
    sensor = topic in _SENSOR
    depth = 50 if topic == 'imu' else 5 if sensor else 10 if topic == '/diagnostics' else 1
    lines = [
        '- history: keep_last', f'  depth: {depth}',
        f'  reliability: {"best_effort" if sensor else "reliable"}',
        f'  durability: {"transient_local" if topic in _LATCHED else "volatile"}']
    for name in ('deadline', 'lifespan'):
        lines += _endless(name)
    return '\n'.join([*lines, '  liveliness: automatic', *_endless('liveliness_lease_duration'),
                      '  avoid_ros_namespace_conventions: false'])


def _endless(name: str) -> list[str]:
    return [f'  {name}:', *(f'    {key}: {value}' for key, value in _ENDLESS.items())]
