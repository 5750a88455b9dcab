"""What controller and allocator are told: the supervisor's state and the reference."""

import numpy as np

from suspended_ctrl.nodes.managed import ManagedNode
from suspended_ctrl.physics.reference import Reference
from suspended_ctrl.rig.frozen import frozen

_NOWHERE = frozen(np.zeros((1, 3)))
# Fewer than two points clear what was followed.
_CLEARED = Reference(0.0, frozen([0.0]), _NOWHERE, _NOWHERE, _NOWHERE,
                     frozen([[1.0, 0.0, 0.0, 0.0]]), _NOWHERE, _NOWHERE)


class OrdersInbox:
    """
    State and reference, which hold until the next message.

    Parameters
    ----------
    node : ManagedNode

    Attributes
    ----------
    state : str
        One of ``physics.values.SAFETY_STATES``; ``locked`` before the supervisor has spoken.

    """

    def __init__(self, node: ManagedNode) -> None:
        self._state_in = node.inbox('safety/state')
        self._reference_in = node.inbox('reference')
        self.state = 'locked'

    def take(self) -> Reference | None:
        """Bring ``state`` up to date; return a new reference, None if none came."""
        self.state = self._state_in.newest() or self.state
        references = self._reference_in.empty()
        if not references:
            return None
        return _CLEARED if references[-1] is None else references[-1]
