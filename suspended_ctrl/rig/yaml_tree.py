"""YAML text as plain values, with the line of every one."""

from dataclasses import dataclass
import re
from typing import Any

from ruamel.yaml import YAML
from ruamel.yaml.comments import CommentedMap, CommentedSeq
from ruamel.yaml.constructor import DuplicateKeyError
from ruamel.yaml.error import MarkedYAMLError, YAMLError
from ruamel.yaml.scalarbool import ScalarBoolean

from suspended_ctrl.rig.errors import InputError
from suspended_ctrl.rig.section import Key

Path = tuple[Key, ...]

# Far above any file that a person writes; stops aliases of aliases from filling the memory.
_VALUES_MAX = 50_000


@dataclass(frozen=True)
class Tree:
    """
    A file's contents.

    Attributes
    ----------
    value : object
        Dicts, tuples (for lists), str, int, float, bool and None.
    lines : dict
        Line, counted from 1, by path of keys and indices.

    """

    value: Any
    lines: dict[Path, int]

    def line(self, path: Path) -> int:
        """Line of the value at ``path``, or of the nearest thing around it."""
        while path not in self.lines and path:
            path = path[:-1]
        return self.lines.get(path, 1)


class _Plain:
    """Turns what the round-trip loader gives into plain values and notes the lines."""

    def __init__(self, file: str) -> None:
        self.file = file
        self.lines: dict[Path, int] = {(): 1}
        self.open: set[int] = set()

    def refuse(self, path: Path, value: object, allowed: str) -> InputError:
        line = Tree(None, self.lines).line(path)
        return InputError(f'{self.file}:{line}: {key_text(path)}: value {value_text(value)}: '
                          f'{allowed}')

    def convert(self, node: Any, path: Path, line: int) -> Any:
        self.lines[path] = line + 1
        if len(self.lines) > _VALUES_MAX:
            raise self.refuse(path, '...', f'at most {_VALUES_MAX} values in a file')
        if isinstance(node, CommentedMap | CommentedSeq):
            if id(node) in self.open:
                raise self.refuse(path, 'alias', 'no alias to something that holds it')
            if node.tag.value is not None and not node.tag.value.startswith('tag:yaml.org,2002:'):
                raise self.refuse(path, node.tag.value, 'no tags')
            self.open.add(id(node))
            out = (self.mapping(node, path, line) if isinstance(node, CommentedMap)
                   else self.sequence(node, path, line))
            self.open.discard(id(node))
            return out
        return self.scalar(node, path)

    def mapping(self, node: CommentedMap, path: Path, line: int) -> dict[str, Any]:
        out = {}
        for key, value in node.items():
            if not isinstance(key, str):
                raise self.refuse(path, key, 'keys are plain words')
            # Keys that a merge brought in have no place of their own.
            own = node.lc.data is not None and key in node.lc.data
            at = node.lc.key(key)[0] if own else line
            out[str(key)] = self.convert(value, (*path, str(key)), at)
        return out

    def sequence(self, node: CommentedSeq, path: Path, line: int) -> tuple[Any, ...]:
        known = node.lc.data or {}
        return tuple(self.convert(value, (*path, i), known[i][0] if i in known else line)
                     for i, value in enumerate(node))

    def scalar(self, node: Any, path: Path) -> Any:
        if node is None or isinstance(node, bool):
            return node
        if isinstance(node, ScalarBoolean):
            return bool(node)
        for kind in (int, float, str):
            if isinstance(node, kind):
                return kind(node)
        raise self.refuse(path, str(getattr(node, 'value', node)),
                          'text, numbers, true or false, lists and mappings; quote dates')


def key_text(path: Path) -> str:
    """Write a path as ``rotors[0].axis``."""
    text = ''
    for part in path:
        text += f'[{part}]' if isinstance(part, int) else f'.{part}' if text else part
    return text or 'the file'


def value_text(value: Any) -> str:
    """Write a value as YAML would in one line, shortened."""
    if value is None:
        text = 'empty'
    elif isinstance(value, bool):
        text = 'true' if value else 'false'
    elif isinstance(value, str):
        text = repr(value)
    elif isinstance(value, dict):
        text = '{' + ', '.join(f'{k}: {value_text(v)}' for k, v in value.items()) + '}'
    elif isinstance(value, tuple | list):
        text = '[' + ', '.join(value_text(v) for v in value) + ']'
    elif isinstance(value, int) and abs(value) > 10 ** 20:
        text = 'of more than 20 digits'
    else:
        text = {'nan': '.nan', 'inf': '.inf', '-inf': '-.inf'}.get(repr(value), repr(value))
    return text if len(text) <= 80 else text[:77] + '...'


def _syntax(file: str, text: str, error: YAMLError) -> InputError:
    mark = getattr(error, 'problem_mark', None)
    problem = str(getattr(error, 'problem', None) or error)
    if not isinstance(error, MarkedYAMLError) or mark is None:
        return InputError(f'{file}:1: not YAML: {problem}')
    twice = re.match(r'found duplicate key "(.*?)" with value "(.*)" \(original value', problem,
                     re.DOTALL)
    if isinstance(error, DuplicateKeyError) and twice:
        return InputError(f'{file}:{mark.line + 1}: {twice[1]}: value {twice[2][:80]}: each key '
                          'once, this one is there already')
    rows = text.splitlines()
    row = rows[mark.line].strip() if mark.line < len(rows) else 'end of file'
    return InputError(f'{file}:{mark.line + 1}: not YAML: value {value_text(row)}: {problem}')


def parse(text: str, file: str) -> Tree:
    """
    Read one YAML 1.2 document.

    Parameters
    ----------
    text : str
        Contents of the file.
    file : str
        Its name, for messages.

    Returns
    -------
    Tree

    Raises
    ------
    InputError
        For anything that is not one mapping of plain values.

    """
    try:
        root = YAML(typ='rt').load(text)
    except YAMLError as error:
        raise _syntax(file, text, error) from error
    except RecursionError as error:
        raise InputError(f'{file}:1: not readable: nested too deep') from error
    except (ValueError, OverflowError) as error:
        raise InputError(f'{file}:1: not readable: {error}') from error
    if not isinstance(root, CommentedMap):
        what = 'the file is empty' if root is None else f'value {value_text(root)}'
        raise InputError(f'{file}:1: {what}: a mapping, lines of key: value')
    plain = _Plain(file)
    first = root.lc.line if root.lc.line is not None else 0
    return Tree(plain.convert(root, (), first), plain.lines)
