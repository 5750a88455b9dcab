"""
Where the platform is: stamped samples in, in any order, an estimate out.

The estimate speaks of the newest accepted pose's stamp while poses flow, else of the newest
sample.
"""

from dataclasses import dataclass, field
import math

import numpy as np

from suspended_ctrl.estimation.alignment import Alignment
from suspended_ctrl.estimation.body import BodyModel, build_body
from suspended_ctrl.estimation.guard import Guard
from suspended_ctrl.estimation.horizon import Horizon
from suspended_ctrl.estimation.intake import SampleIntake
from suspended_ctrl.estimation.output import estimate_of, no_estimate
from suspended_ctrl.estimation.settings import EstimatorSettings, settings_for
from suspended_ctrl.estimation.start import try_start
from suspended_ctrl.estimation.timeline import Entry, PAYLOAD, POSE
from suspended_ctrl.physics.values import Estimate, Payload, Sample
from suspended_ctrl.rig.rig import Rig

# Poses count as stopped after so many periods without one.
MISSING_PERIODS = 3.0
# A pose waits so long for the other samples up to its stamp.
WAIT_S = 0.05
# Of the greatest lag of a pose behind the newest sample this share is left at the next pose.
LAG_KEPT = 0.98
# An offset of the stamps is reported from here on, if it is so many standard deviations.
OFFSET_REPORTED_S = 0.004
OFFSET_SIGMAS = 5.0


@dataclass(frozen=True, eq=False)
class EstimatorInputs:
    """Samples that arrived since the last step."""

    samples: tuple[Sample, ...] = ()


@dataclass(frozen=True, eq=False)
class EstimatorOutputs:
    """The estimate, figures for diagnostics, and a sentence for people if something is wrong."""

    estimate: Estimate
    diagnostics: dict[str, float] = field(default_factory=dict)
    message: str = ''


class Estimator(SampleIntake):
    """
    State estimation for a rig, or for any body with an IMU and a motion-capture pose.

    Parameters
    ----------
    rig : Rig, optional
        None is a plain inertial filter: nothing is known of what moves the body.
    settings : EstimatorSettings, optional
        From the rig if left out; must be given without one.

    Attributes
    ----------
    rig, settings :
        As above.
    guard : Guard
        Counts of what was refused.
    alignment : Alignment or None
        What start-up found; None before.

    Raises
    ------
    ValueError
        If both are left out.

    """

    def __init__(self, rig: Rig | None = None, settings: EstimatorSettings | None = None) -> None:
        if settings is None:
            if rig is None:
                raise ValueError('without a rig the settings (noise) must be given')
            settings = settings_for(rig)
        super().__init__(rig, Guard(settings))
        self.settings = settings
        self.alignment: Alignment | None = None
        self._message = 'no pose yet'
        self._horizon = Horizon(settings, self._loaded(Payload()), self._loaded,
                                self.guard.verdict)
        if rig is not None:
            self._horizon.filter.u[:3] = rig.carrier.anchor_map(np.zeros(len(rig.carrier.axes)))
        self._missing_s = MISSING_PERIODS * settings.pose_period_s
        self._pose_lag_s = 0.0
        self._pose_newest_s = -math.inf
        self._other_newest_s = -math.inf
        self._judge_s = -math.inf
        self._given: Estimate | None = None

    # ------------------------------------------------------------ answers

    def step(self, t: float, inputs: EstimatorInputs) -> EstimatorOutputs:
        """
        Take samples and say where the platform is.

        Parameters
        ----------
        t : float
            Now, s.
        inputs : EstimatorInputs
            What arrived since the last step.

        Returns
        -------
        EstimatorOutputs
            Stamps of estimates never go back, except after a jump of the clock.

        """
        for sample in inputs.samples:
            self.take(sample)
        estimate = self._answer()
        return EstimatorOutputs(estimate, self._diagnostics(t), self.message)

    def state(self, t: float) -> Estimate:
        """
        Estimate at any stamp.

        Parameters
        ----------
        t : float
            s; see ``horizon.Horizon.at``.

        Returns
        -------
        Estimate
            Not valid before start-up, nor where the memory ends.

        """
        known = self._horizon.at(t) if self.alignment else None
        return no_estimate() if known is None else estimate_of(known)

    @property
    def message(self) -> str:
        """Say what people should know, or nothing."""
        if self.offset_found:
            return f'pose stamps off by {1e3 * self._horizon.filter.offset_s:.1f} ms'
        return self._message

    @property
    def offset_found(self) -> bool:
        """Whether the pose stamps are on another clock than the other samples'."""
        state = self._horizon.filter
        size = abs(state.offset_s)
        return (size > OFFSET_REPORTED_S
                and size > OFFSET_SIGMAS * math.sqrt(state.offset_variance_s2))

    def _answer(self) -> Estimate:
        if self.alignment is None:
            return no_estimate()
        accepted = self._horizon.filter.accepted_s
        newest = self.guard.newest_s
        late = not newest - accepted <= self._pose_lag_s + self._missing_s
        target = newest if late else accepted
        if self._given is None or target > self._given.stamp_s:
            self._given = self.state(target)
        return self._given

    # ------------------------------------------------------------ inside

    def _push(self, t: float, kind: int, entry: Entry) -> bool:
        guard, horizon = self.guard, self._horizon
        if not guard.stamp(kind, t, horizon.oldest_s):
            if guard.jumped:
                self._rebase()
            return False
        if not horizon.note((t, kind), entry):
            return guard.count(kind, 'duplicate')
        if kind == POSE:
            self._pose_lag_s = max(guard.newest_s - t, LAG_KEPT * self._pose_lag_s)
            self._pose_newest_s = max(self._pose_newest_s, t)
            if self.alignment is None:
                self._try_start(t)
        elif kind != PAYLOAD:
            self._other_newest_s = max(self._other_newest_s, t)
        if self.alignment is not None:
            horizon.absorb(self._limit_s())
        return True

    def _limit_s(self) -> float:
        """Stamp up to which samples may be absorbed now."""
        limit, newest = self._pose_newest_s, self.guard.newest_s
        if newest - limit > self._pose_lag_s + self._missing_s:
            return newest - self._pose_lag_s - self.settings.pose_period_s
        if limit - WAIT_S < self._other_newest_s < limit:
            return self._other_newest_s
        return limit

    def _loaded(self, payload: Payload) -> BodyModel:
        return build_body(self.rig, payload)

    def _try_start(self, t: float) -> None:
        if t < self._judge_s:
            return
        found = try_start(self._horizon.line, self.settings, self._horizon.filter)
        if found is None:
            self._message = 'aligning: hold still'
            return
        self._message = found.message
        if not found.ok:
            # Another look when a quarter of the window is new.
            self._judge_s = t + 0.25 * self.settings.alignment_s
            return
        self._imu_usable = found.imu_usable
        self.alignment = found
        self._horizon.begin(found.imu_usable)

    def _rebase(self) -> None:
        """Go on with the present state on the clock that the samples now have."""
        self.guard.restart()
        t = self.guard.newest_s
        self._pose_newest_s = self._other_newest_s = t
        self._judge_s = -math.inf
        self._given = None
        self._horizon.restart(t, self.alignment is not None)

    def _diagnostics(self, t: float) -> dict[str, float]:
        state, guard = self._horizon.filter, self.guard
        figures = {
            'started': float(self.alignment is not None),
            'pose_age_s': t - state.accepted_s,
            'pose_lag_s': self._pose_lag_s,
            'nis': state.nis,
            'poses_accepted': float(guard.accepted),
            'poses_gated': float(guard.gated),
            'pose_repeats': float(guard.repeats),
            'recoveries': float(state.recoveries),
            'imu_surprises': float(state.surprises),
            'stamp_offset_s': state.offset_s,
            'stamp_offset_sigma_s': math.sqrt(state.offset_variance_s2),
            'stamp_offset_found': float(self.offset_found),
        }
        if self.alignment is not None:
            figures['aligned_mass_kg'] = self.alignment.mass_kg
            figures['aligned_rest_length_m'] = self.alignment.rest_length_m
        for name, count in guard.refused.items():
            figures[f'refused.{name}'] = float(count)
        return figures
