"""Many random sequences of events; the long one of the supervisor's tests."""

import os

from hypothesis import given, HealthCheck, note, Phase, settings
from hypothesis import strategies as st
import pytest
from random_walk import Walk
from walk_events import do, EVENT, EVENTS, rig_of

# As many as fit into `make test`; SUSPENDED_CTRL_WALKS=10000 takes a minute and a half.
WALKS = int(os.environ.get('SUSPENDED_CTRL_WALKS', '2500'))


@pytest.mark.timeout(900)
@given(st.booleans(), st.lists(EVENT, min_size=4, max_size=10))
@settings(max_examples=WALKS, deadline=None, database=None, phases=(Phase.generate,),
          suppress_health_check=list(HealthCheck))
def test_many_sequences(enabled_first, numbers):
    note([EVENTS[number] for number in numbers])
    walk = Walk(rig_of('bay_head'))
    walk.go(6)
    if enabled_first:
        walk.step('enable')
        assert walk.state == 'live'
    for number in numbers:
        do(walk, number)
