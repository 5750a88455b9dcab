"""Arrays that cannot be written, for values that several parts share."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

__all__ = ['Array', 'ArrayLike', 'frozen']


def frozen(value: ArrayLike, *shape: int) -> Array:
    """
    Copy ``value`` into a float64 array that refuses writes.

    Parameters
    ----------
    value : array_like
        Numbers in any nesting that numpy accepts.
    *shape : int
        The shape the result must have; none given means any shape.

    Returns
    -------
    ndarray
        C-contiguous float64 copy, ``writeable`` false.

    Raises
    ------
    ValueError
        If ``shape`` is given and the value has another one.

    """
    array = np.array(value, dtype=np.float64, order='C')
    if shape and array.shape != shape:
        raise ValueError(f'expected shape {shape}, got {array.shape}')
    array.setflags(write=False)
    return array
