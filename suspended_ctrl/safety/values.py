"""What the supervisor is given at each step and what it hands back."""

from collections.abc import Mapping
from dataclasses import dataclass, field

from suspended_ctrl.physics.values import CarrierCommand, Estimate, RotorCommand, Sample
from suspended_ctrl.rig.frozen import Array

REQUESTS = ('enable', 'disable', 'stop', 'reset')


@dataclass(frozen=True, slots=True)
class EmergencyStop:
    """One message of the emergency stop's line: pressed or not."""

    pressed: bool


@dataclass(frozen=True, slots=True)
class Heartbeat:
    """One sign of life of the operator's client."""


@dataclass(frozen=True, slots=True)
class Refused:
    """A message that could not be turned into a value: its topic, and why."""

    topic: str
    reason: str


Message = Sample | Estimate | RotorCommand | CarrierCommand | EmergencyStop | Heartbeat | Refused


@dataclass(frozen=True, eq=False, slots=True)
class SafetyInputs:
    """
    What reached the supervisor since its last step.

    Attributes
    ----------
    now_s : float
        The host's ROS clock at this step, against which stamps are judged.
    arrivals : tuple of (float, Message)
        In order of arrival; the float is the monotonic time of arrival, on the clock of ``t``.
        A ``RotorCommand`` is the rotor demand, a ``CarrierCommand`` the carrier demand, an
        ``Estimate`` the odometry.
    requests : tuple of str
        Each one of ``REQUESTS``; answered in the same order.
    peers : mapping of str to bool, optional
        Which other nodes are there; None leaves what was known.

    """

    now_s: float
    arrivals: tuple[tuple[float, Message], ...] = ()
    requests: tuple[str, ...] = ()
    peers: Mapping[str, bool] | None = None


@dataclass(frozen=True, slots=True)
class Reply:
    """Answer to one request, in the shape of a ROS trigger service."""

    request: str
    success: bool
    message: str


@dataclass(frozen=True, slots=True)
class SafetyEvent:
    """
    A limit that broke while rotor power was on, or an emergency stop.

    Attributes
    ----------
    t_s : float
        Monotonic time of the step.
    cause : str
        Name of the limit.
    stop_category : int or None
        0, 1 or 2 of IEC 60204-1 as applied here and now; None where the rig can go on.
    values : tuple of (str, float)
        The figures that made it, units in their names.

    """

    t_s: float
    cause: str
    stop_category: int | None
    values: tuple[tuple[str, float], ...] = ()


@dataclass(frozen=True, slots=True)
class StateChange:
    """A change of state: when, from, to, why, and the figures that made it."""

    t_s: float
    before: str
    after: str
    cause: str
    values: tuple[tuple[str, float], ...] = ()


@dataclass(frozen=True, eq=False, slots=True)
class SafetyOutputs:
    """
    What the supervisor says at one step; always complete, whatever came in.

    Attributes
    ----------
    state : str
        One of ``physics.values.SAFETY_STATES``.
    rotor_command : RotorCommand
    carrier_command : CarrierCommand or None
        None without axes, and until the axes were measured once.
    margin : ndarray, shape (number of limits,)
        What is left of each limit, in the order of the supervisor's ``limits``: 1 untouched, 0 at
        the limit, negative beyond it (not below -10), nan where the limit does not apply.
    events : tuple of SafetyEvent
        Newly raised.
    changes : tuple of StateChange
    replies : tuple of Reply
    failed_checks : tuple of str
        Limits that are broken now and keep the rig from being enabled; only outside live states.

    """

    state: str
    rotor_command: RotorCommand
    carrier_command: CarrierCommand | None
    margin: Array
    events: tuple[SafetyEvent, ...] = field(default=())
    changes: tuple[StateChange, ...] = field(default=())
    replies: tuple[Reply, ...] = field(default=())
    failed_checks: tuple[str, ...] = field(default=())
