"""What a node says of itself once a second."""

from collections.abc import Mapping, Sequence

import numpy as np

from suspended_ctrl.nodes.channels import Inbox
from suspended_ctrl.review.messages import Diagnostics, NodeStatus

OK, WARNING, ERROR = 0, 1, 2


class Health:
    """
    Counts and durations of a node's steps, between two reports and since its start.

    Parameters
    ----------
    name : str
        Of the node, namespace included.

    """

    def __init__(self, name: str) -> None:
        self.name = name
        self.steps = 0
        self.late = 0
        self._durations_s: list[float] = []
        self._reported = (0, 0)

    def stepped(self, duration_s: float) -> None:
        """Note a step of the node's part."""
        self.steps += 1
        self._durations_s.append(duration_s)

    def report(self, t: float, state: str, inboxes: Sequence[Inbox], fault: str,
               notes: Mapping[str, float]) -> Diagnostics:
        """
        Say how it went since the last report.

        Parameters
        ----------
        t : float
            Now, s.
        state : str
            Of the node's lifecycle.
        inboxes : sequence of Inbox
            Whose counts are told.
        fault : str
            Why it could not do what it was told last; empty if it could.
        notes : mapping of str to float
            What the part says of itself.

        Returns
        -------
        Diagnostics
            One status. Durations in s, of this period; counts since the start.

        """
        refused = {box.topic: box.refused for box in inboxes}
        counts = (self.late, sum(refused.values()))
        level, message = OK, state
        if fault:
            level, message = ERROR, fault
        elif counts[0] > self._reported[0]:
            level, message = WARNING, f'{counts[0] - self._reported[0]} ticks late'
        elif counts[1] > self._reported[1]:
            level, message = WARNING, f'{counts[1] - self._reported[1]} messages refused'
        self._reported = counts
        values = {'state': state, 'steps': str(self.steps), 'late': str(self.late)}
        if self._durations_s:
            p50, p99, worst = np.percentile(self._durations_s, (50, 99, 100)).tolist()
            values |= {'step_p50_s': f'{p50:.6f}', 'step_p99_s': f'{p99:.6f}',
                       'step_max_s': f'{worst:.6f}'}
            self._durations_s = []
        values |= {f'received.{box.topic}': str(box.received) for box in inboxes}
        values |= {f'refused.{name}': str(count) for name, count in refused.items()}
        values |= {name: f'{value:.6g}' for name, value in notes.items()}
        return Diagnostics(t, (NodeStatus(self.name, level, message, values),))
