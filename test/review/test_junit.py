"""JUnit XML that CI systems can read."""

from xml.etree import ElementTree as ET

import pytest

from suspended_ctrl.review.junit import junit_xml
from suspended_ctrl.review.log import RunFacts, RunLog
from suspended_ctrl.review.metrics import assess
from suspended_ctrl.rig.file import load_rig

# Elements, their attributes and children: the JUnit schema of the xUnit plugin for Jenkins
# (junit-10.xsd), the parts used here; from memory.
ALLOWED = {
    'testsuites': ({'name', 'time', 'tests', 'failures', 'disabled', 'errors'}, {'testsuite'}),
    'testsuite': ({'name', 'tests', 'failures', 'errors', 'group', 'time', 'skipped', 'timestamp',
                   'hostname', 'id', 'package', 'file', 'log', 'url', 'version'},
                  {'properties', 'testcase', 'system-out', 'system-err'}),
    'properties': (set(), {'property'}),
    'property': ({'name', 'value'}, set()),
    'testcase': ({'name', 'assertions', 'time', 'classname', 'status', 'class', 'file', 'line',
                  'log', 'group', 'url'},
                 {'skipped', 'error', 'failure', 'system-out', 'system-err'}),
    'failure': ({'type', 'message'}, set()),
    'system-out': (set(), set()),
}
REQUIRED = {'testsuite': {'name', 'tests', 'failures', 'errors'},
            'testcase': {'name', 'classname'},
            'property': {'name', 'value'}}


def assessed(mission='probe_dock', ended='tripped: hook_angle & <more>'):
    log = RunLog(RunFacts(mission=mission, seed=3, ended=ended))
    return assess(log, load_rig('bay_head'), {'tracking.position_max_m': 0.01,
                                              'tether.tension_min_n': {'at_least': 5.0}})


def check(element):
    attributes, children = ALLOWED[element.tag]
    assert set(element.attrib) <= attributes, element.tag
    assert set(element.attrib) >= REQUIRED.get(element.tag, set()), element.tag
    for child in element:
        assert child.tag in children, (element.tag, child.tag)
        check(child)


def test_it_follows_the_schema():
    check(ET.fromstring(junit_xml(assessed()).encode()))


def test_each_criterion_is_a_case_with_value_and_bound():
    suite = ET.fromstring(junit_xml(assessed()).encode()).find('testsuite')
    cases = {case.get('name'): case for case in suite.iter('testcase')}
    assert list(cases) == ['run_completed', 'tracking.position_max_m', 'tether.tension_min_n']
    assert (suite.get('tests'), suite.get('failures')) == ('3', '3')
    assert cases['run_completed'].find('failure').get('message') == 'tripped: hook_angle & <more>'
    assert '<= 0.01 wanted' in cases['tracking.position_max_m'].find('failure').get('message')
    assert '>= 5 wanted' in cases['tether.tension_min_n'].find('failure').get('message')


@pytest.mark.parametrize('name', ['a\x00b', 'tab\tbell\x07', 'blade \U0001f6a7 ]]>', '"quoted\''])
def test_any_name_makes_a_well_formed_document(name):
    root = ET.fromstring(junit_xml(assessed(mission=name, ended=name)).encode())
    check(root)
