"""
Compilation of the numerical kernels that run every tick.

Each kernel declares its signature and is compiled when its module is first imported, so nothing
compiles while a platform hangs in the air. numba notices a change of the file a kernel stands in
but not of a file that it calls into; kernels call only this folder's, so the cache carries a
digest of this folder in its name.
"""

from collections.abc import Callable
import hashlib
import os
from pathlib import Path
from typing import Any, TypeVar

import numba
from numba import types

_Function = TypeVar('_Function', bound=Callable[..., Any])

REAL = types.float64
INTEGER = types.int64
TRUTH = types.boolean
# Read-only inputs: numba passes writable arrays to these as well.
VECTOR = types.Array(types.float64, 1, 'C', readonly=True)
MATRIX = types.Array(types.float64, 2, 'C', readonly=True)
FLAGS = types.Array(types.boolean, 1, 'C', readonly=True)
OUT_VECTOR = types.Array(types.float64, 1, 'C')
OUT_MATRIX = types.Array(types.float64, 2, 'C')
OUT_FLAGS = types.Array(types.boolean, 1, 'C')


def _cache_directory() -> str:
    digest = hashlib.sha256()
    for source in sorted(Path(__file__).parent.glob('*.py')):
        digest.update(source.read_bytes())
    root = Path(os.environ.get('XDG_CACHE_HOME') or Path.home() / '.cache')
    return str(root / 'suspended_ctrl' / f'kernels-{digest.hexdigest()[:12]}')


if not os.environ.get('NUMBA_CACHE_DIR'):
    numba.config.CACHE_DIR = _cache_directory()


def kernel(signature: object) -> Callable[[_Function], _Function]:
    """
    Compile a function for one signature, at import, cached on disk.

    Parameters
    ----------
    signature : numba signature
        For example ``REAL(VECTOR, MATRIX)``. Arrays are float64 and C-contiguous.

    Returns
    -------
    callable
        A decorator. Division by zero gives inf or nan as in numpy; no reordering of sums.

    """
    compiled: Callable[[_Function], _Function] = numba.njit(
        signature, cache=True, fastmath=False, error_model='numpy')
    return compiled
