"""Read a YAML file that a pydantic model describes; every problem is one line."""

import os
from pathlib import Path
from typing import Any, TypeVar

from pydantic import BaseModel, ValidationError

from suspended_ctrl.rig.errors import InputError
from suspended_ctrl.rig.key_hints import unit_words
from suspended_ctrl.rig.yaml_tree import key_text, parse, Tree, value_text
from suspended_ctrl.rig.yaml_tree import Path as KeyPath

Model = TypeVar('Model', bound=BaseModel)

_MISSING = object()


def read_text(path: str | os.PathLike[str]) -> str:
    """
    Read a text file.

    Parameters
    ----------
    path : path-like
        Of the file.

    Returns
    -------
    str

    Raises
    ------
    InputError
        If it is missing, no file, not readable or not UTF-8.

    """
    file = Path(path)
    try:
        return file.read_text(encoding='utf-8')
    except FileNotFoundError:
        raise InputError(f'{file}: no such file: a readable YAML file') from None
    except IsADirectoryError:
        raise InputError(f'{file}: a directory: a readable YAML file') from None
    except UnicodeDecodeError as error:
        raise InputError(f'{file}: not text in UTF-8 (byte {error.start}): a YAML file') from None
    except (OSError, ValueError) as error:
        reason = getattr(error, 'strerror', None) or str(error)
        raise InputError(f'{file}: {reason}: a readable YAML file') from None


def read_file(path: str | os.PathLike[str], model: type[Model]) -> Model:
    """
    Read and check a YAML file.

    Parameters
    ----------
    path : path-like
        Of the file.
    model : subclass of pydantic.BaseModel
        Best built of ``Section`` and the types beside it. Lists arrive as tuples.

    Returns
    -------
    Model
        An instance of ``model``.

    Raises
    ------
    InputError
        ``file:line: key: value X: what is allowed`` for the first problem by line, then how many
        more there are.

    """
    return read_tree(parse(read_text(path), os.fspath(path)), os.fspath(path), model)


def read_tree(tree: Tree, file: str, model: type[Model]) -> Model:
    """
    Check values that were parsed already.

    Parameters
    ----------
    tree : Tree
        The values.
    file : str
        Its name, for messages.
    model : subclass of pydantic.BaseModel
        What they must be.

    Returns
    -------
    Model
        An instance of ``model``.

    Raises
    ------
    InputError
        As ``read_file``.

    """
    try:
        return model.model_validate(tree.value)
    except ValidationError as error:
        # Alternatives of a union fail one by one at the same place: one problem together.
        problems: dict[KeyPath, tuple[str, list[str]]] = {}
        for item in error.errors(include_url=False):
            path, value, allowed = _problem(tree, dict(item))
            problems.setdefault(path, (value, []))[1].append(allowed)
    first = min(problems, key=tree.line)
    value, sentences = problems[first]
    more = f' (and {len(problems) - 1} more)' if len(problems) > 1 else ''
    raise InputError(f'{file}:{tree.line(first)}: {key_text(first)}: value {value}: '
                     f'{" or ".join(dict.fromkeys(sentences))}{more}')


def _problem(tree: Tree, error: dict[str, Any]) -> tuple[KeyPath, str, str]:
    """Path, value and what is allowed, of one of pydantic's errors."""
    kind, context = error['type'], error.get('ctx', {})
    loc: KeyPath = error['loc']
    last: KeyPath = ()
    if kind == 'missing':
        loc, last = loc[:-1], loc[-1:]
    elif kind == 'refused':
        last = context['key']
    elif kind.startswith('union_tag'):
        last = (context['discriminator'].strip("'"),)
    path, value = _locate(tree.value, loc)
    for part in last:
        path = (*path, part)
        value = _child(value, part)
    text = 'missing' if value is _MISSING else value_text(value)
    if kind == 'refused' and isinstance(context['value'], str) and not isinstance(value, str):
        text = context['value']
    return path, text, _allowed(error, context, path, value)


def _child(data: Any, part: Any) -> Any:
    if isinstance(data, dict):
        return data.get(part, _MISSING)
    here = isinstance(data, tuple) and isinstance(part, int) and part < len(data)
    return data[part] if here else _MISSING


def _locate(data: Any, loc: tuple[Any, ...]) -> tuple[KeyPath, Any]:
    """Path in the file and value there; tags of unions, which the file does not hold, left out."""
    path: KeyPath = ()
    for part in loc:
        child = _child(data, part)
        if child is not _MISSING:
            path, data = (*path, part), child
    return path, data


_KINDS = {'string_type': 'text', 'bool_type': 'true or false', 'int_type': 'a whole number',
          'tuple_type': 'a list', 'list_type': 'a list', 'dict_type': 'a mapping',
          'finite_number': 'a finite number'}
_BOUNDS = {'greater_than': ('gt', 'above'), 'greater_than_equal': ('ge', 'of at least'),
           'less_than': ('lt', 'below'), 'less_than_equal': ('le', 'of at most')}


def _allowed(error: dict[str, Any], context: dict[str, Any], path: KeyPath, value: Any) -> str:
    kind = error['type']
    unit = unit_words(next((part for part in reversed(path) if isinstance(part, str)), ''))
    in_unit = f' in {unit}' if unit and not unit.startswith('a ') else ''
    if kind == 'refused':
        return str(context['allowed'])
    if kind == 'missing':
        return f'required{in_unit and ","}{in_unit}'
    if kind in _BOUNDS:
        name, words = _BOUNDS[kind]
        return f'a number {words} {context[name]:g}{in_unit}'
    if kind == 'float_type':
        bare = ', without quotes and without a unit' if isinstance(value, str) else ''
        return f'a number{in_unit}{bare}'
    if kind in ('too_short', 'too_long'):
        short = kind == 'too_short'
        bound, words = ('min_length', 'at least') if short else ('max_length', 'at most')
        return f'a list of {words} {context[bound]}, there are {context["actual_length"]}'
    if kind == 'literal_error':
        return f'one of {context["expected"]}'
    if kind.startswith('union_tag'):
        return f'one of {context["expected_tags"]}' if 'expected_tags' in context else 'required'
    if kind == 'string_pattern_mismatch':
        return 'a name of letters, digits, blanks, dots, - and _'
    return _KINDS.get(kind, str(error['msg']))
