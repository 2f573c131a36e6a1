"""Values in the few types that JSON knows."""

import math
from typing import Any

import numpy as np


def plain(value: Any) -> Any:
    """The same in types that JSON knows; numbers that are not finite become None.

    Raises
    ------
    TypeError
        For a type that has no plain form.
    """
    if value is None or isinstance(value, str):
        return value
    if isinstance(value, bool | np.bool_):
        return bool(value)
    if isinstance(value, int | np.integer):
        return int(value)
    if isinstance(value, float | np.floating):
        return float(f"{value:.6g}") if math.isfinite(value) else None
    if isinstance(value, dict):
        return {key: plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple | np.ndarray):
        return [plain(item) for item in value]
    raise TypeError(f"verdict document: got a {type(value).__name__}; must be made of plain types")
