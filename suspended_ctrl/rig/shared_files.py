"""Where the files that come with the package are."""

import os
from pathlib import Path
import sys

from suspended_ctrl.rig.errors import InputError

PACKAGE = 'suspended_ctrl'


def config_folder() -> Path:
    """
    Find the folder that holds ``rigs``, ``missions``, ``faults`` and ``parameters``.

    Returns
    -------
    Path
        ``config`` beside the package in a source checkout (also when installed as editable or by
        symlinks), else ``share/suspended_ctrl/config`` of the prefix it was installed to.

    Raises
    ------
    InputError
        If the package was installed without it.

    """
    package = Path(__file__).resolve().parents[1]
    root = package.parent
    if (root / 'package.xml').is_file() and (root / 'config' / 'rigs').is_dir():
        return root / 'config'
    for prefix in (*package.parents, Path(sys.prefix)):
        folder = prefix / 'share' / PACKAGE / 'config'
        if folder.is_dir():
            return folder
    raise InputError(f'{package}: no share/{PACKAGE}/config in any folder above: install the '
                     'package with its data files')


def find_file(path_or_name: str | os.PathLike[str], kind: str,
              relative_to: str | os.PathLike[str] | None = None) -> Path:
    """
    Find a file by the name of one that comes with the package, or by path.

    Parameters
    ----------
    path_or_name : str or path-like
        A bare name, such as ``bay_head``, or a path.
    kind : str
        Folder of ``config``: ``rigs``, ``missions``, ``faults`` or ``parameters``.
    relative_to : path-like, optional
        Folder that relative paths start from; the working folder if left out.

    Returns
    -------
    Path

    Raises
    ------
    InputError
        If it is empty, or a bare name is neither a file of that kind nor a file at that place.
        Whether a path exists is left to whoever reads it.

    """
    given = os.fspath(path_or_name)
    if not given:
        raise InputError(f"value '': a path, or a name of a file in {config_folder() / kind}")
    path = Path(relative_to or '') / given
    is_name = Path(given).name == given and Path(given).suffix not in ('.yaml', '.yml')
    if not is_name:
        return path
    folder = config_folder() / kind
    named = folder / f'{given}.yaml'
    if named.is_file():
        return named
    if path.is_file():
        return path
    names = ', '.join(sorted(file.stem for file in folder.glob('*.yaml'))) or 'none'
    raise InputError(f'{given}: no such file in {folder}: a path, or one of {names}')
