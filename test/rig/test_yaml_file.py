"""The reader of YAML files by a model of its own, whatever the file is for."""

from typing import Annotated, Literal

from hypothesis import given, settings
from hypothesis import strategies as st
from pydantic import Field
import pytest
from ruamel.yaml import YAML
from ruamel.yaml.compat import StringIO

from suspended_ctrl.rig.errors import InputError
from suspended_ctrl.rig.key_hints import nearest_key
from suspended_ctrl.rig.section import Count, Name, Number, Positive, Section, UnitFraction
from suspended_ctrl.rig.yaml_file import read_file, read_tree
from suspended_ctrl.rig.yaml_tree import parse


class Push(Section):
    kind: Literal['push']
    at_s: Number


class Weaken(Section):
    kind: Literal['weaken']
    share: UnitFraction


class Bounds(Section):
    at_least: Number


class Sheet(Section):
    name: Name = 'sheet'
    rows: Count = 1
    steps: tuple[Annotated[Push | Weaken, Field(discriminator='kind')], ...] = ()
    accept: dict[str, Positive | Bounds] = {}


def said(text: str) -> str:
    with pytest.raises(InputError) as caught:
        read_tree(parse(text, 'f.yaml'), 'f.yaml', Sheet)
    return str(caught.value)


def test_good(tmp_path) -> None:
    file = tmp_path / 'f.yaml'
    file.write_text('steps:\n  - {kind: push, at_s: 1}\n  - {kind: weaken, share: 0.5}\n'
                    'accept: {a.b: 0.1, c.d: {at_least: -2}}\n')
    sheet = read_file(file, Sheet)
    assert sheet.steps == (Push(kind='push', at_s=1.0), Weaken(kind='weaken', share=0.5))
    assert sheet.accept == {'a.b': 0.1, 'c.d': Bounds(at_least=-2.0)}
    with pytest.raises(ValueError, match='frozen'):
        sheet.rows = 2


@pytest.mark.parametrize('text, wanted', [
    ('rows: 1.5', 'f.yaml:1: rows: value 1.5: a whole number'),
    ('rows: true', 'f.yaml:1: rows: value true: a whole number'),
    ('rows: 0', 'f.yaml:1: rows: value 0: a number of at least 1'),
    ('\nsteps: 3', 'f.yaml:2: steps: value 3: a list'),
    ('steps:\n  - {kind: shove}', "f.yaml:2: steps[0].kind: value 'shove': one of "
     "'push', 'weaken'"),
    ('steps:\n  - {at_s: 1}', 'f.yaml:2: steps[0].kind: value missing: required'),
    ('steps:\n  - kind: push\n    at_ms: 5', 'f.yaml:3: steps[0].at_ms: value 5: unknown unit, '
     'did you mean at_s (in seconds)?'),
    ('steps:\n  - {kind: weaken, share: 1.5}',
     'f.yaml:2: steps[0].share: value 1.5: a number of at most 1'),
    ('accept:\n  a.b: x', "f.yaml:2: accept.a.b: value 'x': a number, without quotes and without "
     'a unit or a mapping with keys at_least'),
    ('"\\e[31m": 1', r'f.yaml:1: \x1b[31m: value 1: unknown key, allowed here: name, rows, steps, '
     'accept'),
])
def test_messages(text: str, wanted: str) -> None:
    assert said(text) == wanted


@pytest.mark.parametrize('key, wanted', [
    ('mass_g', 'mass_kg'), ('mass', 'mass_kg'), ('mas_kg', 'mass_kg'), ('Mass_kg', 'mass_kg'),
    ('rest_length_ft', 'rest_length_m'), ('hoist_m', None), ('speed_max', 'speed_max_m_s'),
    ('speed_min_mm_s', 'speed_min_m_s')])
def test_nearest_key(key: str, wanted: str | None) -> None:
    keys = ('mass_kg', 'rest_length_m', 'speed_max_m_s', 'speed_min_m_s')
    assert nearest_key(key, keys) == wanted


KEYS = st.from_regex(r'[a-z]{1,6}', fullmatch=True)
PLAIN = st.recursive(
    st.none() | st.booleans() | st.integers(-10**12, 10**12)
    | st.floats(allow_nan=False)
    | st.text(st.characters(categories=('L', 'N', 'P', 'Zs')), max_size=8),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(KEYS, inner, max_size=4),
    max_leaves=6)


def tuples(value: object) -> object:
    if isinstance(value, list):
        return tuple(tuples(item) for item in value)
    if isinstance(value, dict):
        return {key: tuples(item) for key, item in value.items()}
    return value


@settings(max_examples=30, deadline=None)
@given(st.dictionaries(KEYS, PLAIN, min_size=1, max_size=3))
def test_what_was_written_comes_back(data: dict[str, object]) -> None:
    stream = StringIO()
    YAML(typ='safe', pure=True).dump(data, stream)
    assert parse(stream.getvalue(), 'f.yaml').value == tuples(data)


@settings(max_examples=100, deadline=None)
@given(st.text(st.sampled_from('ab: -[]{}&*!|>\'"%@,#?\n\t<1.~'), max_size=40))
def test_no_text_raises_anything_else(text: str) -> None:
    said = 'f.yaml:'
    try:
        read_tree(parse(text, 'f.yaml'), 'f.yaml', Sheet)
    except InputError as error:
        said = str(error)
    assert said.startswith('f.yaml:')
    assert said.isprintable()
