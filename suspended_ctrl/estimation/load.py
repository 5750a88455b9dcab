"""
A load picked up or let go.

At rest added mass cannot be told from a push downward: the event decides. What it says counts at
once; a change of the vertical disturbance soon after it, well above its error, is taken for a
payload of another mass than was said.
"""

from collections.abc import Callable

from suspended_ctrl.estimation.body import BodyModel
from suspended_ctrl.estimation.filter import ErrorStateFilter
from suspended_ctrl.physics.values import Payload

# After so long the change of the disturbance is judged.
SETTLE_S = 0.25
# The payload may be off what was said by this share, 1 sigma ...
SHARE = 0.3
# ... and is corrected if it is off by so many standard deviations, by up to half of it.
SIGMAS = 4.0
SHARE_MAX = 0.5


def take_load(state: ErrorStateFilter, loaded: Callable[[Payload], BodyModel],
              payload: Payload) -> None:
    """
    Put on the load of an event, and open the disturbance for what it may weigh otherwise.

    Parameters
    ----------
    state : ErrorStateFilter
        The filter.
    loaded : callable
        Body that carries a payload.
    payload : Payload
        As said; none at zero mass.

    """
    changed = abs(payload.mass_kg - state.body.payload.mass_kg)
    state.load_mark = (float(state.x[21]), float(state.p[20, 20]))
    state.set_body(loaded(payload))
    state.p[20, 20] += (SHARE * changed * float(state.body.vector[25]))**2


def settle_load(state: ErrorStateFilter, loaded: Callable[[Payload], BodyModel]) -> None:
    """Correct the payload's mass by what the vertical disturbance has changed since the event."""
    payload = state.body.payload
    if payload.mass_kg == 0.0:
        return
    gravity = float(state.body.vector[25])
    force, variance = state.load_mark
    change = float(state.x[21]) - force
    more_kg = -change / gravity
    if (change * change < SIGMAS**2 * (variance + float(state.p[20, 20]))
            or abs(more_kg) > SHARE_MAX * payload.mass_kg):
        return
    state.set_body(loaded(Payload(payload.mass_kg + more_kg, payload.position_m)))
    state.x[21] = force
    state.linearise()
