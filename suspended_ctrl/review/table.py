"""One topic's values over time, as values that came one by one or as columns read in one go."""

from abc import ABC, abstractmethod
from typing import Any

import numpy as np

from suspended_ctrl.physics.values import PayloadEvent
from suspended_ctrl.review.messages import Disturbance
from suspended_ctrl.review.topics import Topic
from suspended_ctrl.rig.frozen import Array

_POSE, _TWIST = slice(0, 6), slice(6, 12)


class Table(ABC):
    """
    Values of a topic in the order of time.

    Columns are attributes named as the value's fields: ``table.position_map_m``, shape (n, 3).
    An estimate's covariance has two columns, ``pose_covariance`` (position in map, attitude in
    body) and ``twist_covariance`` (velocity in map, rate in body), shapes (n, 6, 6).

    Parameters
    ----------
    topic : Topic

    """

    def __init__(self, topic: Topic) -> None:
        self.topic = topic

    @abstractmethod
    def __len__(self) -> int:
        """Return how many values there are."""

    @property
    @abstractmethod
    def log_s(self) -> Array:
        """Host times of recording, shape (n,)."""

    @abstractmethod
    def column(self, name: str) -> Array:
        """
        One field of every value.

        Parameters
        ----------
        name : str
            Of the field.

        Returns
        -------
        ndarray, shape (n, ...)
            Shape (0,) where there are no values.

        Raises
        ------
        AttributeError
            If the topic's values have no such field.

        """

    def __getattr__(self, name: str) -> Array:
        """Column by its name."""
        if name.startswith('_'):
            raise AttributeError(name)
        return self.column(name)


class Columns(Table):
    """
    Whole columns, from a recording.

    Parameters
    ----------
    topic : Topic
    log_s : ndarray, shape (n,)
    columns : dict of str to ndarray, shape (n, ...)

    """

    def __init__(self, topic: Topic, log_s: Array, columns: dict[str, Array]) -> None:
        super().__init__(topic)
        self._log_s = log_s
        self._columns = columns

    def __len__(self) -> int:
        """Return how many values there are."""
        return len(self._log_s)

    @property
    def log_s(self) -> Array:
        """Host times of recording, shape (n,)."""
        return self._log_s

    def column(self, name: str) -> Array:
        """One field of every value, see ``Table``."""
        if name not in self._columns:
            raise AttributeError(f'{self.topic.name} has no column {name!r}')
        return self._columns[name]


class Rows(Table):
    """
    Values one by one: append to ``times`` and ``rows``.

    Attributes
    ----------
    times : list of float
    rows : list

    """

    def __init__(self, topic: Topic) -> None:
        super().__init__(topic)
        self.times: list[float] = []
        self.rows: list[Any] = []
        self._columns: dict[str, Array] = {}
        self._counted = 0

    def __len__(self) -> int:
        """Return how many values there are."""
        return len(self.times)

    @property
    def log_s(self) -> Array:
        """Host times of recording, shape (n,)."""
        return self.column('_log_s')

    def column(self, name: str) -> Array:
        """One field of every value, see ``Table``."""
        if self._counted != len(self.times):
            self._columns = {}
            self._counted = len(self.times)
        if name not in self._columns:
            self._columns[name] = self._gather(name)
        return self._columns[name]

    def _gather(self, name: str) -> Array:
        if name == '_log_s':
            return np.array(self.times)
        if not self.rows:
            return np.zeros(0)
        if name == 'pose_covariance':
            return np.array([row.covariance[_POSE, _POSE] for row in self.rows])
        if name == 'twist_covariance':
            return np.array([row.covariance[_TWIST, _TWIST] for row in self.rows])
        column = [getattr(row, name) for row in self.rows]
        if isinstance(column[0], np.ndarray):
            # One long copy is several times faster than stacking thousands of short arrays.
            return np.concatenate(column).reshape(len(column), *column[0].shape)
        return np.array(column)


def disturbance_of(odometry: Rows, topic: Topic) -> Rows:
    """Disturbances that estimates carry, as a table of their own."""
    table = Rows(topic)
    table.times = odometry.times
    table.rows = [Disturbance(one.stamp_s, one.disturbance_force_map_n,
                              one.disturbance_torque_map_nm) for one in odometry.rows]
    return table


def payload_of(odometry: Rows, topic: Topic) -> Rows:
    """Payloads that estimates carry, as a table of their own."""
    table = Rows(topic)
    table.times = odometry.times
    table.rows = [PayloadEvent(one.stamp_s, one.payload.mass_kg, one.payload.position_m)
                  for one in odometry.rows]
    return table
