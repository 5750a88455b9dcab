"""Events of the walks: a table of them, drawn by number, which costs one draw an event."""

from functools import lru_cache
import itertools

from hypothesis import strategies as st
import numpy as np
from random_walk import ARRAYS, KINDS, REQUESTS, SENDERS, Walk, WALK_LIMITS, WEIRD

from suspended_ctrl.rig.file import load_rig
from suspended_ctrl.rig.rig import Rig

BAD_DEMANDS = (None, None, np.full(8, np.nan), np.full(8, 2000.0), np.full(7, 300.0),
               np.array([]), 'fast')
SHIFTS_S = (0.0, 0.0, -0.5, 0.5, -3600.0, 3600.0, np.nan, np.inf, -np.inf)
STAMPS = (0.0, 0.0, 0.0, -0.01, -0.1, -0.19, -0.3, 0.04, 0.06, -5.0, 5.0, *WEIRD)
# How many numbers each kind of event has: the more, the more often it is drawn.
SHARE = 256


def _table() -> tuple[tuple[object, ...], ...]:
    rng = np.random.default_rng(20)
    switch = (True, False)
    kinds = (
        [('go', n) for n in range(1, 16)],
        [('request', name) for name in REQUESTS],
        [('request', 'enable')],
        list(itertools.product(('hear',), SENDERS, switch)),
        list(itertools.product(('press',), switch)),
        list(itertools.product(('break_limit',), WALK_LIMITS, switch)),
        [('spoil_demand', k) for k in range(len(BAD_DEMANDS))],
        [('shift_demand', s) for s in SHIFTS_S],
        [('jump_clock', s) for s in (0.0, -2.0, 2.0, 0.05)],
        [('late', s) for s in (0.02, 0.07, 0.09, 0.5)],
        [('throw', KINDS[rng.integers(len(KINDS))], STAMPS[rng.integers(len(STAMPS))],
          int(rng.integers(len(ARRAYS))), int(rng.integers(len(ARRAYS)))) for _ in range(2048)],
    )
    table = [event for kind in kinds
             for event in itertools.islice(itertools.cycle(kind), max(SHARE, len(kind) // 4))]
    # Shuffled: whatever numbers are drawn more often stand for nothing in particular.
    return tuple(table[i] for i in rng.permutation(len(table)))


EVENTS = _table()
EVENT = st.integers(0, len(EVENTS) - 1)


@lru_cache(maxsize=2)
def rig_of(name: str) -> Rig:
    """Read a reference rig, once."""
    return load_rig(name)


def do(walk: Walk, number: int) -> None:
    """Let the event of this number happen."""
    name, *arguments = EVENTS[number]
    if name == 'request':
        walk.step(*arguments)
    elif name == 'late':
        walk.step(dt=arguments[0])
    elif name == 'spoil_demand':
        walk.spoil_demand(BAD_DEMANDS[arguments[0]])
    elif name == 'throw':
        kind, stamp, a, b = arguments
        walk.throw(kind, stamp, ARRAYS[a], ARRAYS[b])
    else:
        getattr(walk, name)(*arguments)
