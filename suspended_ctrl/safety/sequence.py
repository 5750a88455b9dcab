"""
The states of the rig and every way from one to another.

========== ============ ========== ========================================================
state      event        next       meaning
========== ============ ========== ========================================================
locked     green        ready      every check is green
ready      not_green    locked     an input is missing, or a limit is broken
ready      enable       live       the only way to rotor power
live       stop         stopping   the operator's own stop, category 1
live       category_2   holding    held at rest under power
live       category_1   stopping   brought to rest, then power removed
live       category_0   tripped    power removed at once
holding    reset        live       cause gone and acknowledged; power was never removed
holding    stop         stopping
holding    category_1   stopping   also when held for too long, or moving while held
holding    category_0   tripped
stopping   category_0   tripped    also when not at rest in time
stopping   rest         ready      after the operator's own stop: nothing is latched
stopping   rest_latched tripped    after a limit's stop
tripped    reset        locked     cause gone and acknowledged; checks decide about ready
locked     emergency    tripped    an emergency stop latches from everywhere
ready      emergency    tripped
========== ============ ========== ========================================================

An event that a state does not list leaves it. A limit of category 1 that breaks during the
operator's own stop latches (``rest_latched`` from then on) and restarts no clock. Reset never
restarts anything: from ``tripped`` an enable must follow; from ``holding`` it returns to ``live``,
where the controller, having dropped its reference on leaving ``live``, goes on holding the pose.
"""

ROTOR_POWER = frozenset(('live', 'holding', 'stopping'))

TRANSITIONS = {
    ('locked', 'green'): 'ready',
    ('locked', 'emergency'): 'tripped',
    ('ready', 'not_green'): 'locked',
    ('ready', 'enable'): 'live',
    ('ready', 'emergency'): 'tripped',
    ('live', 'stop'): 'stopping',
    ('live', 'category_2'): 'holding',
    ('live', 'category_1'): 'stopping',
    ('live', 'category_0'): 'tripped',
    ('holding', 'reset'): 'live',
    ('holding', 'stop'): 'stopping',
    ('holding', 'category_1'): 'stopping',
    ('holding', 'category_0'): 'tripped',
    ('stopping', 'category_0'): 'tripped',
    ('stopping', 'rest'): 'ready',
    ('stopping', 'rest_latched'): 'tripped',
    ('tripped', 'reset'): 'locked',
}


def next_state(state: str, event: str) -> str:
    """
    State after an event.

    Parameters
    ----------
    state : str
        One of ``physics.values.SAFETY_STATES``.
    event : str
        As in the table above.

    Returns
    -------
    str
        The table's next state, or ``state`` where the table has no such row.

    """
    return TRANSITIONS.get((state, event), state)
