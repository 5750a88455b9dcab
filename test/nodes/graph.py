"""A small graph of real processes for tests: a rig that hangs still, and the means to ask it."""

from contextlib import contextmanager
import time

from std_srvs.srv import SetBool, Trigger

from suspended_ctrl.nodes.domain import own_domain
from suspended_ctrl.nodes.processes import Processes
from suspended_ctrl.nodes.session_node import SessionNode
from suspended_ctrl.review.log import RunFacts
from suspended_ctrl.rig.file import load_rig

# A machine that checks other things at the same time takes its time to start processes.
UP_WITHIN_S = 120.0
MISSION = """
name: short_hop
rig: bay_head
start: {position_m: [0.0, 0.0, 2.68]}
path:
  - move_to: {position_m: [0.2, 0.0, 2.68], duration_s: 1.5}
  - dwell: {seconds: 0.3}
accept: {tracking.position_max_m: 0.010}
"""


class Graph:
    """The nodes of a rig as processes, and a node of the test's own that records them."""

    def __init__(self, folder, environment, domain, names):
        self.processes = Processes(environment | {'ROS_LOG_DIR': str(folder)}, folder)
        self.recording = folder / 'run'
        self.node = SessionNode(load_rig('bay_head'), domain, '', self.recording, {
            'safety/enable': SetBool, 'safety/reset': Trigger})
        for name in names:
            self.start(name)

    def start(self, name):
        self.processes.start(name, [])

    def turn(self, seconds):
        until = time.monotonic() + seconds
        while time.monotonic() < until:
            self.node.turn()
            time.sleep(0.005)

    def until(self, condition, within_s):
        """Turn until something is the case; say what the nodes said if it does not come."""
        until = time.monotonic() + within_s
        while not condition():
            if time.monotonic() > until:
                said = {path.name: path.read_text()[-500:]
                        for path in self.recording.parent.glob('*.log')}
                raise AssertionError(f'state {self.node.state}, cause {self.node.cause}: {said}')
            self.node.turn()
            time.sleep(0.005)

    def ask(self, service, request):
        self.until(self.node.answering, UP_WITHIN_S)
        future = self.node.request(service, request)
        self.until(future.done, 10.0)
        return future.result()

    def enable(self):
        """Bring the rig from wherever it is to live."""
        if self.node.state == 'tripped':
            deadline = time.monotonic() + UP_WITHIN_S
            while not self.ask('safety/reset', Trigger.Request()).success:
                assert time.monotonic() < deadline
                self.turn(0.2)
        self.until(self.node.settled, UP_WITHIN_S)
        answer = self.ask('safety/enable', SetBool.Request(data=True))
        assert answer.success, answer.message
        self.until(lambda: self.node.state == 'live', 5.0)

    def close(self):
        self.processes.end()
        self.node.close(RunFacts())


@contextmanager
def graph(folder, environment, names):
    """Run nodes in a domain of their own."""
    with own_domain() as domain:
        made = Graph(folder, environment | {
            'ROS_DOMAIN_ID': str(domain), 'ROS_AUTOMATIC_DISCOVERY_RANGE': 'LOCALHOST'}, domain,
            names)
        try:
            yield made
        finally:
            made.close()
