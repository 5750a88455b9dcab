"""The estimate as it travels: odometry, and the disturbance and payload that belong to it."""

import numpy as np

from suspended_ctrl.nodes.managed import ManagedNode
from suspended_ctrl.nodes.wire import motion_reader
from suspended_ctrl.physics.lead import PlatformState
from suspended_ctrl.physics.values import Estimate, Payload
from suspended_ctrl.review.messages import Disturbance
from suspended_ctrl.review.topics import TOPICS
from suspended_ctrl.rig.frozen import frozen

# Neither controller nor allocator looks at it.
_NO_COVARIANCE = frozen(np.zeros((12, 12)))
_ZERO = frozen(np.zeros(3))


class EstimateInbox:
    """
    Newest estimate out of three topics, without its covariance.

    The estimator sends the odometry last, so the newest of the other two belongs to it.

    Parameters
    ----------
    node : ManagedNode

    Attributes
    ----------
    odometry : Inbox
        What wakes whoever steps on estimates.

    """

    def __init__(self, node: ManagedNode) -> None:
        self.odometry = node.inbox('odometry', motion_reader(TOPICS['odometry']))
        self._disturbance_in = node.inbox('disturbance')
        self._payload_in = node.inbox('payload')
        self.forget()

    def forget(self) -> None:
        """Forget what came so far."""
        self._disturbance = Disturbance(0.0, _ZERO, _ZERO)
        self._payload = Payload()

    def newest(self) -> Estimate | None:
        """Take everything that waits; None if no odometry came."""
        motion: PlatformState | None = self.odometry.newest()
        if motion is None:
            return None
        self._disturbance = self._disturbance_in.newest() or self._disturbance
        if (event := self._payload_in.newest()) is not None:
            self._payload = Payload(event.mass_kg, event.position_m)
        return Estimate(
            motion.stamp_s, motion.position_map_m, motion.velocity_map_m_s,
            motion.quaternion_wxyz, motion.rate_body_rad_s, _NO_COVARIANCE,
            self._disturbance.force_map_n, self._disturbance.torque_map_nm, self._payload,
            motion.stamp_s, True)
