"""Every kind of fault: what it is called in a file, and what it needs to be told."""

from typing import Annotated, Literal

from pydantic import Field, model_validator

from suspended_ctrl.rig.section import (
    Name,
    NonNegative,
    Number,
    Positive,
    refuse,
    Section,
    UnitFraction,
    Vector3,
)

Node = Literal['state_estimator', 'wrench_controller', 'effort_allocator', 'safety_supervisor',
               'mission_player', 'rig_bench']
Topic = Literal['pose', 'imu', 'rotor_states', 'carrier_states', 'tether_load', 'emergency_stop']


class Place(Section):
    """A ball in map; the fault begins when the ``base_link`` origin first comes into it."""

    position_m: Vector3
    within_m: Positive


class Once(Section):
    """
    A fault that begins and stays.

    It begins ``at_s`` seconds after the start of the mission's path, or the first time after
    that start that the platform is ``at_place``.
    """

    at_s: NonNegative | None = None
    at_place: Place | None = None

    @model_validator(mode='after')
    def _one_moment(self) -> 'Once':
        if self.at_s is None and self.at_place is None:
            refuse('at_s', None, 'a number of at least 0 in seconds from the start of the path, '
                   'or at_place beside it left out')
        if self.at_s is not None and self.at_place is not None:
            refuse('at_s', self.at_s, 'either this or at_place, not both')
        return self


class Lasting(Once):
    """A fault that ends after ``for_s``, never if that is left out."""

    for_s: Positive | None = None


class PoseGone(Lasting):
    """No poses are measured."""

    kind: Literal['pose_gone']


class PoseLate(Lasting):
    """Poses arrive later than they do anyway."""

    kind: Literal['pose_late']
    by_s: Positive


class PoseJump(Lasting):
    """Poses are off by a fixed step in map and a turn about the vertical at the platform."""

    kind: Literal['pose_jump']
    by_m: Vector3 = (0.0, 0.0, 0.0)
    by_deg: Number = 0.0


class PoseOutliers(Lasting):
    """Some poses are off, by a distance and an angle, in directions drawn evenly."""

    kind: Literal['pose_outliers']
    fraction: UnitFraction
    by_m: NonNegative = 0.0
    by_deg: NonNegative = 0.0


class PoseFrozen(Lasting):
    """Poses keep coming, with new stamps and the value of the last one."""

    kind: Literal['pose_frozen']


class PoseNan(Lasting):
    """Poses hold no numbers."""

    kind: Literal['pose_nan']


class ImuGone(Lasting):
    """The IMU is silent."""

    kind: Literal['imu_gone']


class ImuBiasStep(Lasting):
    """The IMU's biases step, each by its length in a direction drawn evenly."""

    kind: Literal['imu_bias_step']
    rate_rad_s: NonNegative = 0.0
    force_m_s2: NonNegative = 0.0


class RotorDead(Lasting):
    """A rotor has no power and coasts down."""

    kind: Literal['rotor_dead']
    rotor: Name


class RotorStuck(Lasting):
    """A rotor keeps its speed whatever it is told."""

    kind: Literal['rotor_stuck']
    rotor: Name


class RotorWeak(Lasting):
    """A rotor gives a part of its thrust at the speed that it should have, at full torque."""

    kind: Literal['rotor_weak']
    rotor: Name
    factor: UnitFraction


class TelemetryGone(Lasting):
    """No rotor speeds are reported."""

    kind: Literal['telemetry_gone']


class TetherCut(Once):
    """The tether parts at the hook's end."""

    kind: Literal['tether_cut']


class TetherSnag(Lasting):
    """The tether catches on something and is shorter."""

    kind: Literal['tether_snag']
    shorter_by_m: Positive


class CarrierStall(Lasting):
    """An axis brakes to a stop and stands."""

    kind: Literal['carrier_stall']
    axis: Literal['x', 'y', 'hoist']


class CarrierRunaway(Lasting):
    """An axis goes at a speed whatever it is told, to the end of its travel."""

    kind: Literal['carrier_runaway']
    axis: Literal['x', 'y', 'hoist']
    speed_m_s: Number


class Push(Lasting):
    """A force in map at the true centre of mass."""

    kind: Literal['push']
    force_n: Vector3


class GustFault(Lasting):
    """Wind, level, from a drawn direction, with turbulence along and across it."""

    kind: Literal['gust']
    speed_m_s: Positive


class PayloadDrop(Once):
    """What hangs on the platform falls off."""

    kind: Literal['payload_drop']


class EmergencyStop(Lasting):
    """The emergency stop is pressed."""

    kind: Literal['emergency_stop']


class ProcessKilled(Once):
    """A part falls silent for good."""

    kind: Literal['process_killed']
    node: Node


class ProcessStopped(Lasting):
    """A part falls silent and wakes again."""

    kind: Literal['process_stopped']
    node: Node


class ClockJump(Lasting):
    """The clock that stamps the measurements jumps."""

    kind: Literal['clock_jump']
    by_s: Number


class MessageFlood(Lasting):
    """The newest sample of a topic is sent again and again."""

    kind: Literal['message_flood']
    topic: Topic
    rate_hz: Annotated[float, Field(gt=0.0, le=1.0e5)]


Fault = (PoseGone | PoseLate | PoseJump | PoseOutliers | PoseFrozen | PoseNan | ImuGone
         | ImuBiasStep | RotorDead | RotorStuck | RotorWeak | TelemetryGone | TetherCut
         | TetherSnag | CarrierStall | CarrierRunaway | Push | GustFault | PayloadDrop
         | EmergencyStop | ProcessKilled | ProcessStopped | ClockJump | MessageFlood)

# In the order that numbers their random streams: append, never reorder.
KINDS = (PoseGone, PoseLate, PoseJump, PoseOutliers, PoseFrozen, PoseNan, ImuGone, ImuBiasStep,
         RotorDead, RotorStuck, RotorWeak, TelemetryGone, TetherCut, TetherSnag, CarrierStall,
         CarrierRunaway, Push, GustFault, PayloadDrop, EmergencyStop, ProcessKilled,
         ProcessStopped, ClockJump, MessageFlood)
