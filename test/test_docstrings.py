"""Docstrings name what functions take and classes hold, no more and no less."""

import ast
from collections.abc import Iterator
import inspect
from pathlib import Path
import re

PACKAGE = Path(__file__).resolve().parents[1] / 'suspended_ctrl'
# Arguments that a docstring without a Parameters section may leave to their names and annotations.
UNNAMED_MAX = 3


def public_definitions(node: ast.AST, where: str) -> Iterator[tuple[str, ast.AST, ast.AST]]:
    """Yield place, definition and parent of every public class and function."""
    for child in ast.iter_child_nodes(node):
        if not isinstance(child, ast.FunctionDef | ast.AsyncFunctionDef | ast.ClassDef):
            continue
        if child.name.startswith('_') and child.name != '__init__':
            continue
        if any(ast.unparse(one).endswith('.setter') for one in child.decorator_list):
            continue
        place = f'{where}:{child.lineno} {child.name}'
        yield place, child, node
        if isinstance(child, ast.ClassDef):
            yield from public_definitions(child, where)


def section_names(doc: str, section: str) -> list[str] | None:
    """Names that a numpydoc section describes, None if there is no such section."""
    lines = inspect.cleandoc(doc).splitlines()
    heads = [i for i in range(len(lines) - 1)
             if lines[i] and lines[i + 1] and set(lines[i + 1]) == {'-'}]
    for i, head in enumerate(heads):
        if lines[head] == section:
            end = heads[i + 1] if i + 1 < len(heads) else len(lines)
            rows = [line for line in lines[head + 2:end] if line and not line[0].isspace()]
            return [name.strip().lstrip('*') for row in rows
                    for name in re.split(r'\s+:', row)[0].split(',')]
    return None


def argument_names(node: ast.FunctionDef) -> list[str]:
    """Names of a function's arguments in order, without self and cls."""
    given = node.args
    names = [one.arg for one in (*given.posonlyargs, *given.args)]
    if given.vararg:
        names.append(given.vararg.arg)
    names += [one.arg for one in given.kwonlyargs]
    if given.kwarg:
        names.append(given.kwarg.arg)
    return [name for name in names if name not in ('self', 'cls')]


def docstring_faults(tree: ast.AST, where: str) -> list[str]:
    """Arguments and attributes that docstrings leave out, or name though there are none."""
    faults = []
    for place, node, parent in public_definitions(tree, where):
        doc = ast.get_docstring(node) or ''
        if isinstance(node, ast.ClassDef):
            faults += attribute_faults(node, doc, place)
            continue
        if node.name == '__init__':
            doc = ast.get_docstring(parent) or ''
        elif not doc:
            faults.append(f'{place}: no docstring')
            continue
        names = argument_names(node)
        described = section_names(doc, 'Parameters')
        if described is None:
            unnamed = [name for name in names if not re.search(rf'\b{name}\b', doc)]
            if len(unnamed) > UNNAMED_MAX:
                faults.append(f'{place}: says nothing of {", ".join(unnamed)}')
        elif sorted(described) != sorted(names):  # arguments of one kind may stand together
            faults.append(f'{place}: describes {described}, takes {names}')
    return faults


def attribute_faults(node: ast.ClassDef, doc: str, place: str) -> list[str]:
    """Fields that a class's Attributes section leaves out, of a class that has both."""
    described = section_names(doc, 'Attributes')
    if not doc:
        return [f'{place}: no docstring']
    if described is None:
        return []
    fields = [child.target.id for child in node.body
              if isinstance(child, ast.AnnAssign) and isinstance(child.target, ast.Name)
              and not child.target.id.startswith('_')]
    missing = [name for name in fields if name not in described]
    return [f'{place}: attributes {missing} are not described'] if missing else []


def test_what_is_public_is_documented():
    faults = [fault for path in sorted(PACKAGE.rglob('*.py'))
              for fault in docstring_faults(ast.parse(path.read_text(encoding='utf-8')),
                                            str(path.relative_to(PACKAGE)))]
    assert not faults, '\n'.join(faults)


SAMPLE = '''
def f(a, *rest, b=1):
    """
    Do it.

    Parameters
    ----------
    a, b : int
        Numbers.

    """

def g(one, two, three, four):
    """Do it."""

def h(a):
    pass

class C:
    """
    Hold it.

    Attributes
    ----------
    a : int
        A number.

    """

    a: int
    b: int
'''


def test_undocumented_arguments_are_found():
    faults = docstring_faults(ast.parse(SAMPLE), 'sample')
    assert [fault.split(': ')[0].split()[1] for fault in faults] == ['f', 'g', 'h', 'C']
