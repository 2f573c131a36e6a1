"""Read-only arrays for the records: what a user changes afterwards must not change a result."""

import numpy as np


def frozen_array(values, dtype) -> np.ndarray:
    """A C-contiguous read-only array of the given type.

    Parameters
    ----------
    values : array-like
        Copied, unless it is already a read-only array of this type that owns its memory.
    dtype : numpy dtype

    Returns
    -------
    ndarray
        With ``flags.writeable`` False.
    """
    if (
        isinstance(values, np.ndarray)
        and values.dtype == dtype
        and values.base is None
        and values.flags.c_contiguous
        and not values.flags.writeable
    ):
        return values
    array = np.array(values, dtype=dtype, order="C", copy=True)
    array.flags.writeable = False
    return array
