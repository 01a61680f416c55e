"""Permitted ranges: arrays checked at the engine's border, answered by one typed error."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from worker.engine.errors import OutOfRange


def require_within(
    quantity: str, value: ArrayLike, low: float, high: float, unit: str = ""
) -> NDArray[np.float64]:
    """Real array whose elements all lie in the closed range.

    Parameters
    ----------
    quantity
        Name that the error carries, with its unit suffix as in the caller's signature.
    value
        Real values, any shape.
    low, high
        Permitted range in `unit`, both ends included.
    unit
        SI unit, empty for a pure number.

    Returns
    -------
    numpy.ndarray
        The values as float64, shape kept.

    Raises
    ------
    OutOfRange
        An element lies outside, or is not a number.
    """
    array = np.asarray(value, dtype=np.float64)
    # A comparison with NaN is false, so NaN counts as outside.
    inside = (array >= low) & (array <= high)
    if not np.all(inside):
        raise OutOfRange(quantity, float(array[~inside].flat[0]), low, high, unit)
    return array


def require_magnitude_within(
    quantity: str, value: ArrayLike, low: float, high: float, unit: str = ""
) -> NDArray[np.complex128]:
    """Complex array whose magnitudes all lie in the closed range.

    Parameters
    ----------
    quantity
        Name that the error carries; it adds that the magnitude is meant.
    value
        Complex values, any shape.
    low, high
        Permitted range of the magnitude in `unit`, both ends included.
    unit
        SI unit, empty for a pure number.

    Returns
    -------
    numpy.ndarray
        The values as complex128, shape kept.

    Raises
    ------
    OutOfRange
        A magnitude lies outside, or is not a number.
    """
    array = np.asarray(value, dtype=np.complex128)
    require_within(f"{quantity} (magnitude)", np.abs(array), low, high, unit)
    return array
