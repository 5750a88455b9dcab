"""Any of the four nodes killed while live: no power to the rotors at the bench, and in time."""

import os
import signal
import time

from graph import graph
import numpy as np
import pytest

from suspended_ctrl.review.bag_read import read_bag

# Times of processes mean something only where nothing else runs.
pytestmark = [pytest.mark.graph, pytest.mark.skipif(
    not os.environ.get('SUSPENDED_CTRL_TIMED'),
    reason='timed: SUSPENDED_CTRL_TIMED=1 on an otherwise idle machine')]

CHAIN = ('state_estimator', 'wrench_controller', 'effort_allocator')
NODES = ('safety_supervisor', *CHAIN, 'rig_bench')
# From the kill to zero at the bench: 80 ms that a demand or command may be silent, a tick, the
# way of two messages.
ZERO_WITHIN_S = 0.120
TRUTH_EVERY_S = 0.020
ATTEMPTS = 3


def killed(rig, name):
    """Kill a node of a live rig, host time of it; one that a busy machine trips is tried again."""
    for _ in range(ATTEMPTS):
        rig.enable()
        rig.turn(0.5)
        if rig.node.state == 'live':
            at = time.time()
            rig.processes.send(name, signal.SIGKILL)
            return at
    raise AssertionError(f'not live for half a second in {ATTEMPTS} attempts: {rig.node.cause}')


def late_s(times, at):
    """By how much this machine held up the commands in the second before."""
    before = times[(times > at - 1.0) & (times <= at)]
    return max(float(np.diff(before).max()) - 0.005, 0.0)


def test_rotors_are_without_power_in_time(tmp_path):
    at = {}
    with graph(tmp_path, dict(os.environ), NODES) as rig:
        for name in CHAIN:
            at[name] = killed(rig, name)
            rig.until(lambda: rig.node.state == 'tripped', 5.0)
            assert rig.node.cause in ('odometry_stale', 'demand_stale')
            rig.start(name)
        at['safety_supervisor'] = killed(rig, 'safety_supervisor')
        rig.turn(1.0)
        recording = rig.recording
    log = read_bag(recording)
    command, truth = log.rotor_command, log.ground_truth_rotors
    for name in CHAIN:
        after = command.log_s > at[name]
        zero = ~command.speed_rad_s.any(axis=1)
        cut_s = float(command.log_s[after & zero][0]) - at[name]
        assert cut_s <= ZERO_WITHIN_S + late_s(command.log_s, at[name]), name
        # And nothing but zero until the next enable.
        tripped = command.log_s > at[name] + cut_s
        following = tripped & (command.log_s < at[name] + cut_s + 1.0)
        assert not command.speed_rad_s[following].any(), name
    # Nobody is left to say zero: the drives' own watchdog cuts, and the rotors run down.
    killed_s = at['safety_supervisor']
    allowed_s = ZERO_WITHIN_S + TRUTH_EVERY_S + late_s(truth.log_s, killed_s)
    before = truth.speed_rad_s[truth.log_s <= killed_s][-1]
    later = truth.speed_rad_s[truth.log_s >= killed_s + allowed_s][0]
    # Power off by 120 ms leaves less than one lag's share e^-(20/44) of the speed 20 ms later.
    assert before.min() > 100.0
    assert (later < np.exp(-20.0 / 44.0) * before).all()
