"""
The filter at a delayed horizon, and the samples around it.

Samples up to the horizon are absorbed in the order of their stamps; later ones wait. One that
comes too late for that makes the filter go back to a snapshot and come again.
"""

from collections.abc import Callable

import numpy as np

from suspended_ctrl.estimation.body import BodyModel
from suspended_ctrl.estimation.filter import ErrorStateFilter
from suspended_ctrl.estimation.load import settle_load, SETTLE_S, take_load
from suspended_ctrl.estimation.motion import Snapshot
from suspended_ctrl.estimation.settings import EstimatorSettings
from suspended_ctrl.estimation.timeline import (
    CARRIER,
    Entry,
    IMU,
    Key,
    PAYLOAD,
    POSE,
    ROTORS,
    SETTLED,
    TETHER,
    Timeline,
)
from suspended_ctrl.physics.values import Payload

SNAPSHOT_EVERY_S = 0.02


class Horizon:
    """
    A filter with a memory.

    Parameters
    ----------
    settings : EstimatorSettings
    body : BodyModel
    loaded : callable
        Body that carries a payload.
    verdict : callable
        Told stamp and fate of every pose.

    """

    def __init__(self, settings: EstimatorSettings, body: BodyModel,
                 loaded: Callable[[Payload], BodyModel],
                 verdict: Callable[[float, bool], None]) -> None:
        self._settings = settings
        self._loaded = loaded
        self._verdict = verdict
        self.filter = ErrorStateFilter(settings, body)
        self.line = Timeline()
        self._coaster = ErrorStateFilter(settings, body)
        self._snapshots: list[Snapshot] = []
        self._last: Key = (-np.inf, POSE)

    @property
    def oldest_s(self) -> float:
        """Return the stamp before which samples come too late."""
        return self._snapshots[0].t if self._snapshots else -np.inf

    def begin(self, imu: bool) -> None:
        """Start from the filter as it stands; of the samples before its stamp none is kept."""
        line = self.line
        line.drop(self.filter.t)
        if not imu:
            kept = [(k, e) for k, e in zip(line.keys, line.entries, strict=True) if k[1] != IMU]
            line.keys, line.entries = [k for k, _ in kept], [e for _, e in kept]
        self._mark()

    def restart(self, t: float, running: bool) -> None:
        """Go on from the present state on a clock that now shows ``t``."""
        self.line.clear()
        if running:
            state = self.filter
            state.t = t
            state.u[21:23] = -np.inf
            state.accepted_s = state.refused_since_s = float('nan')
            self._mark()

    def _mark(self) -> None:
        self._last = (self.filter.t, -1)
        self._snapshots = [self.filter.snapshot(self._last)]

    def note(self, key: Key, entry: Entry) -> bool:
        """Take a sample, going back if it belongs before the horizon; false for a duplicate."""
        if not self.line.add(key, entry):
            return False
        if key[1] == PAYLOAD:
            self.line.add((key[0] + SETTLE_S, SETTLED), entry)
        if self._snapshots and key <= self._last:
            while len(self._snapshots) > 1 and self._snapshots[-1].key >= key:
                self._snapshots.pop()
            snapshot = self._snapshots[-1]
            self.filter.restore(snapshot)
            self.line.rewind(snapshot.key)
            self._last = snapshot.key
        return True

    def absorb(self, limit_s: float) -> None:
        """Absorb waiting samples with stamps up to ``limit_s``."""
        line, state = self.line, self.filter
        limit = (limit_s, POSE)
        while line.taken < len(line.keys) and line.keys[line.taken] <= limit:
            key = line.keys[line.taken]
            entry = line.entries[line.taken]
            line.taken += 1
            state.advance(key[0])
            self._last = key
            if key[1] == POSE:
                self._verdict(key[0], state.pose(*entry))
                if key[0] - self._snapshots[-1].t >= SNAPSHOT_EVERY_S:
                    self._keep()
            elif key[1] == IMU:
                state.imu(*entry)
            else:
                self._drive(state, key, entry)
        if state.t - self._snapshots[-1].t >= 2.0 * SNAPSHOT_EVERY_S:
            self._keep()

    def at(self, t: float) -> ErrorStateFilter | None:
        """
        Filter as it stands or would stand at ``t``.

        Parameters
        ----------
        t : float
            Before the horizon: from a snapshot; after it: over the samples that wait, corrected
            with the last gain, then by the model alone.

        Returns
        -------
        ErrorStateFilter or None
            To be read before the next call; None before the oldest snapshot.

        """
        if t == self.filter.t:
            return self.filter
        other = self._coaster
        if t > self.filter.t:
            other.copy_from(self.filter)
            first = self.line.taken
        else:
            known = [s for s in self._snapshots if s.t <= t]
            if not known:
                return None
            other.copy_from(self.filter)
            other.restore(known[-1])
            first = self.line.after(known[-1].key)
        waiting = self.line.between(first, t)
        covariance = other.foresee(t, sum(key[1] == IMU for key, _ in waiting))
        for key, entry in waiting:
            other.coast(key[0])
            if key[1] == IMU:
                other.imu_while_coasting(*entry)
            elif key[1] != POSE:
                self._drive(other, key, entry)
        other.coast(t)
        other.p[:] = covariance
        return other

    def _drive(self, state: ErrorStateFilter, key: Key, entry: Entry) -> None:
        t, kind = key
        if kind == ROTORS:
            state.rotors(t, entry[0])
        elif kind == CARRIER:
            state.anchor(t, entry[0])
        elif kind == TETHER:
            state.tension(float(entry[0][0]))
        elif kind == PAYLOAD:
            take_load(state, self._loaded, Payload(float(entry[0][0]), entry[1]))
        elif kind == SETTLED:
            settle_load(state, self._loaded)

    def _keep(self) -> None:
        snapshots = self._snapshots
        snapshots.append(self.filter.snapshot(self._last))
        oldest = self.filter.t - self._settings.history_s
        if snapshots[0].t < oldest - 0.1:
            self._snapshots = [s for s in snapshots if s.t >= oldest]
            self.line.forget(self._snapshots[0].t)
