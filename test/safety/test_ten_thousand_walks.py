"""Ten thousand random sequences of events; the long one of the supervisor's tests."""

from hypothesis import given, HealthCheck, note, Phase, settings
from hypothesis import strategies as st
import pytest
from random_walk import Walk
from walk_events import do, EVENT, EVENTS, rig_of


@pytest.mark.timeout(900)  # half a minute on an idle machine
@given(st.booleans(), st.lists(EVENT, min_size=4, max_size=10))
@settings(max_examples=10_000, deadline=None, database=None, phases=(Phase.generate,),
          suppress_health_check=list(HealthCheck))
def test_ten_thousand_sequences(enabled_first, numbers):
    note([EVENTS[number] for number in numbers])
    walk = Walk(rig_of('bay_head'))
    walk.go(6)
    if enabled_first:
        walk.step('enable')
        assert walk.state == 'live'
    for number in numbers:
        do(walk, number)
