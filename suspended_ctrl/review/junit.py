"""The verdict as JUnit XML, so that any CI shows each criterion with its value and bound."""

import re
from xml.etree import ElementTree as ET

from suspended_ctrl.review.metrics import Assessment

# What XML 1.0 has no way to write.
_UNWRITABLE = re.compile('[^\t\n\r\x20-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]')


def junit_xml(assessment: Assessment) -> str:
    """
    One test case for the run, one for each criterion.

    Parameters
    ----------
    assessment : Assessment
        Its figures and verdict.

    Returns
    -------
    str
        An XML document. A failure's message has value and bound; a pass has them as its output.

    """
    metrics = assessment.metrics
    name = _clean(f'{metrics["mission"] or "run"} on {metrics["rig"]}')
    failures = sum(not criterion.passed for criterion in assessment.criteria)
    seconds = f'{metrics["duration_s"] or 0.0:.3f}'
    counts = {'tests': str(len(assessment.criteria)), 'failures': str(failures), 'errors': '0'}
    root = ET.Element('testsuites', {'name': 'suspended_ctrl', **counts, 'time': seconds})
    suite = ET.SubElement(root, 'testsuite',
                          {'name': name, **counts, 'skipped': '0', 'time': seconds})
    facts = ET.SubElement(suite, 'properties')
    for key in ('mission', 'rig', 'seed', 'law', 'allocator', 'schema'):
        if metrics[key] is not None:
            ET.SubElement(facts, 'property', {'name': key, 'value': _clean(str(metrics[key]))})
    for index, criterion in enumerate(assessment.criteria):
        case = ET.SubElement(suite, 'testcase', {
            'name': _clean(criterion.key), 'classname': name,
            'time': seconds if index == 0 else '0.000'})
        if criterion.passed:
            ET.SubElement(case, 'system-out').text = _clean(criterion.reason)
        else:
            failure = ET.SubElement(case, 'failure', {
                'message': _clean(criterion.reason), 'type': 'criterion'})
            failure.text = _clean(criterion.reason)
    ET.indent(root)
    return ET.tostring(root, encoding='unicode', xml_declaration=True) + '\n'


def _clean(text: str) -> str:
    return _UNWRITABLE.sub('?', text)
