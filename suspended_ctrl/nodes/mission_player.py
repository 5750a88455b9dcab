"""Node ``mission_player``: hands out the reference of one mission."""

import sys
from typing import Any

from pydantic import Field
from std_srvs.srv import Trigger

from suspended_ctrl.mission.file import load_mission
from suspended_ctrl.mission.player import MissionPlayer, Reply
from suspended_ctrl.mission.timing import timed
from suspended_ctrl.nodes.managed import ManagedNode
from suspended_ctrl.nodes.parameters import NodeParameters
from suspended_ctrl.nodes.run import run_node
from suspended_ctrl.nodes.wire import motion_reader
from suspended_ctrl.physics.lead import PlatformState
from suspended_ctrl.review.topics import TOPICS

NAME = 'mission_player'
_RATE_HZ = 100.0
# A pose older than this is no pose to start from.
_KNOWN_S = 0.5


class MissionPlayerParameters(NodeParameters):
    """Parameters of ``mission_player``."""

    mission: str = Field('panel_pass_1p0', description='Mission file: a name that comes with the '
                         'package, or a path.')


class MissionPlayerNode(ManagedNode):
    """Publishes the whole reference when started, and the payload's changes on the way."""

    parameters: MissionPlayerParameters

    def __init__(self) -> None:
        super().__init__(NAME, MissionPlayerParameters)

    def build(self) -> None:
        """Read and time the mission; make the channels and services."""
        p = self.parameters
        self.part = MissionPlayer(timed(load_mission(p.mission, p.rig)))
        self._odometry = self.inbox('odometry', motion_reader(TOPICS['odometry']))
        self._state_in = self.inbox('safety/state')
        self._reference = self.outbox('reference')
        self._payload = self.outbox('payload_event')
        self._state = 'locked'
        self._motion: PlatformState | None = None
        self._offered = [
            self.create_service(Trigger, 'mission/start', self._start),
            self.create_service(Trigger, 'mission/hold', self._hold),
            self.create_service(Trigger, 'mission/stop', self._stop)]
        self.loop.listen((), 1.0 / _RATE_HZ, timer=True)

    def clean(self) -> None:
        """Withdraw the services."""
        for service in getattr(self, '_offered', ()):
            self.destroy_service(service)
        self._offered = []

    def turn(self, t: float, due: bool) -> None:
        """Send what has come due; give the path up when the rig stops being live."""
        state = self._state_in.newest() or self._state
        if self._state == 'live' and state != 'live' and self.part.reference is not None:
            # Left standing, a latched reference would be followed by whoever starts up later.
            self.part.clear()
            self._reference.send(None)
        self._state = state
        for event in self.part.payload_events(t):
            self._payload.send(event)

    def notes(self) -> dict[str, float]:
        """Share of the path done."""
        return {'progress': self.part.progress(self.now_s())}

    def _answer(self, reply: Reply, response: Any) -> Any:
        response.success, response.message = reply.success, reply.message
        if reply.success:
            self._reference.send(self.part.reference)
        self.get_logger().info(reply.message)
        return response

    def _start(self, _: Trigger.Request, response: Trigger.Response) -> Any:
        now = self.now_s()
        if not self.active:
            return self._answer(Reply(False, 'the mission player is inactive'), response)
        self.turn(now, due=False)
        self._motion = self._odometry.newest() or self._motion
        known = self._motion is not None and now - self._motion.stamp_s <= _KNOWN_S
        motion = self._motion if known else None
        return self._answer(self.part.start(
            now, self._state, motion.position_map_m if motion else None,
            motion.quaternion_wxyz if motion else None), response)

    def _hold(self, _: Trigger.Request, response: Trigger.Response) -> Any:
        if not self.active:
            return self._answer(Reply(False, 'the mission player is inactive'), response)
        return self._answer(self.part.hold(self.now_s()), response)

    def _stop(self, _: Trigger.Request, response: Trigger.Response) -> Any:
        if not self.active:
            return self._answer(Reply(False, 'the mission player is inactive'), response)
        return self._answer(self.part.stop(self.now_s()), response)


def main() -> int:
    """Run the node."""
    return run_node(NAME, __doc__ or '', MissionPlayerParameters, MissionPlayerNode)


if __name__ == '__main__':
    sys.exit(main())
