"""Any order of events, as a state machine under Hypothesis."""

from hypothesis import HealthCheck, note, settings
from hypothesis.stateful import rule, RuleBasedStateMachine, run_state_machine_as_test
import pytest
from random_walk import Walk
from walk_events import do, EVENT, EVENTS, rig_of


class Machine(RuleBasedStateMachine):
    """One walk, event by event."""

    rig_name = 'bay_head'

    def __init__(self) -> None:
        super().__init__()
        self.walk = Walk(rig_of(self.rig_name))
        self.walk.go(8)

    @rule(number=EVENT)
    def event(self, number):
        note(EVENTS[number])
        do(self.walk, number)

    @rule()
    def all_well_and_enable(self):
        """Put everything right and go live: otherwise most walks would never leave locked."""
        walk = self.walk
        walk.silent.clear()
        for limit in tuple(walk.broken):
            walk.break_limit(limit, False)
        walk.press(False)
        walk.spoil_demand(None)
        walk.shift_demand(0.0)
        walk.go(8)
        walk.step('reset')
        if walk.state == 'holding':
            walk.step('stop')
        while walk.state == 'stopping':
            walk.step()
        walk.step('reset')
        walk.go(2)
        walk.step('enable')
        assert walk.state == 'live', (walk.state, walk.last.failed_checks, walk.last.replies)


class SeamHead(Machine):
    """The rig with reversible rotors, no axes, and a rotor to spare."""

    rig_name = 'seam_head'


@pytest.mark.parametrize('machine', [Machine, SeamHead])
def test_any_order_of_events(machine):
    run_state_machine_as_test(machine, settings=settings(
        max_examples=40, stateful_step_count=20, deadline=None, database=None,
        suppress_health_check=list(HealthCheck)))
