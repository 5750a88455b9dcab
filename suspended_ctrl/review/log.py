"""What happened in a run: each topic's values in the order of time, and the run's facts."""

from dataclasses import dataclass, field
from typing import Any

import numpy as np

from suspended_ctrl.review.messages import Diagnostics, NodeStatus
from suspended_ctrl.review.table import disturbance_of, payload_of, Rows, Table
from suspended_ctrl.review.topics import TOPICS
from suspended_ctrl.rig.frozen import Array

_ATTRIBUTES = {name.strip('/').replace('/', '_'): name for name in TOPICS}
# What an estimate carries and the graph sends on topics of its own.
_CARRIED = {'disturbance': disturbance_of, 'payload': payload_of}


@dataclass(frozen=True)
class SafetyEvent:
    """What made the supervisor act: host time, its own words, IEC 60204-1 stop category."""

    t_s: float
    cause: str
    stop_category: int | None


def event_diagnostics(event: SafetyEvent) -> Diagnostics:
    """Build the diagnostics by which an event is sent and recorded."""
    category = '' if event.stop_category is None else str(event.stop_category)
    return Diagnostics(event.t_s, (NodeStatus(
        'safety_supervisor', 2, event.cause, {'event': event.cause, 'stop_category': category}),))


def events_of(diagnostics: Diagnostics) -> list[SafetyEvent]:
    """Events among diagnostics, see ``event_diagnostics``."""
    found = []
    for status in diagnostics.statuses:
        if cause := status.values.get('event'):
            category = status.values.get('stop_category', '')
            found.append(SafetyEvent(diagnostics.stamp_s, cause,
                                     int(category) if category in ('0', '1', '2') else None))
    return found


@dataclass
class RunFacts:
    """
    What a recording's messages do not say; None where nobody knows.

    Attributes
    ----------
    mission, rig, law, allocator : str, optional
        Names.
    seed : int, optional
    rig_text, mission_text : str, optional
        The files themselves, so that a recording can be reviewed without them.
    path_start_s, path_end_s : float, optional
        Host times between which the mission is on its path; without them the last reference's.
    fault_s : float, optional
        Host time of the first injected fault.
    wall_s : float, optional
        Wall-clock seconds that the run took.
    tick_wall_s, plan_wall_s : ndarray
        Wall-clock seconds of each tick and of each plan; empty where not measured.
    events : list of SafetyEvent
        In the order of time.
    ended : str, optional
        Why the run ended before its path did; None where it did not.

    """

    mission: str | None = None
    rig: str | None = None
    seed: int | None = None
    law: str | None = None
    allocator: str | None = None
    rig_text: str | None = None
    mission_text: str | None = None
    path_start_s: float | None = None
    path_end_s: float | None = None
    fault_s: float | None = None
    wall_s: float | None = None
    tick_wall_s: Array = field(default_factory=lambda: np.zeros(0))
    plan_wall_s: Array = field(default_factory=lambda: np.zeros(0))
    events: list[SafetyEvent] = field(default_factory=list)
    ended: str | None = None


class RunLog:
    """
    A recording in memory.

    A topic's table is an attribute of the topic's name (``log.odometry``, ``log.safety_state``,
    ``log.diagnostics``) or ``log['safety/state']``.

    Parameters
    ----------
    facts : RunFacts, optional

    Attributes
    ----------
    facts : RunFacts
    refused : dict of str to int
        Messages of a recording that could not be used, by topic.

    """

    def __init__(self, facts: RunFacts | None = None) -> None:
        self.facts = facts or RunFacts()
        self.refused: dict[str, int] = {}
        self._tables: dict[str, Table] = {name: Rows(topic) for name, topic in TOPICS.items()}

    def append(self, topic: str, log_s: float, value: Any) -> None:
        """
        Add a value.

        Parameters
        ----------
        topic : str
            As in ``TOPICS``.
        log_s : float
            Host time of recording; a topic's must not fall.
        value
            Of the topic's type.

        """
        table = self._tables[topic]
        table.times.append(log_s)  # type: ignore[attr-defined]
        table.rows.append(value)  # type: ignore[attr-defined]

    def __getitem__(self, topic: str) -> Table:
        """Table of a topic by its name in the graph."""
        table = self._tables[topic]
        if topic in _CARRIED and not len(table):
            odometry = self._tables['odometry']
            if isinstance(odometry, Rows) and len(odometry):
                return _CARRIED[topic](odometry, table.topic)
        return table

    def rows(self, topic: str) -> Rows:
        """Table of a topic whose values are kept one by one, such as ``reference``."""
        table = self._tables[topic]
        assert isinstance(table, Rows)
        return table

    def __getattr__(self, name: str) -> Table:
        """Table of a topic by its name as an attribute."""
        if name in _ATTRIBUTES:
            return self[_ATTRIBUTES[name]]
        raise AttributeError(name)

    def add_event(self, t_s: float, cause: str, stop_category: int | None) -> None:
        """Note what made the supervisor act, in the facts and on ``/diagnostics``."""
        event = SafetyEvent(t_s, cause, stop_category)
        self.facts.events.append(event)
        self.append('/diagnostics', t_s, event_diagnostics(event))

    def put(self, table: Table) -> None:
        """Replace a topic's table by one that was read as a whole."""
        self._tables[table.topic.name] = table

    @property
    def start_s(self) -> float:
        """Host time of the first record, nan of an empty log."""
        return min((float(t.log_s[0]) for t in self._tables.values() if len(t)), default=np.nan)

    @property
    def end_s(self) -> float:
        """Host time of the last record, nan of an empty log."""
        return max((float(t.log_s[-1]) for t in self._tables.values() if len(t)), default=np.nan)
