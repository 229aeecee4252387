"""Floats in, floats out; arrays in, arrays out; None is a number that is not recorded."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike


def numbers(*values: ArrayLike | None) -> tuple[Any, ...]:
    """Turn each value into an array of floats, None into nan."""
    return tuple(np.asarray(np.nan if value is None else value, dtype=float) for value in values)


def plain(value: Any) -> Any:
    """Turn an array without dimensions into a Python scalar; leave other arrays alone."""
    return value if np.ndim(value) else value.item()
