"""The door through which numbers enter the stability formulas: positive arrays and known shapes."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from features.errors import PhysicsRangeError, explain

__all__ = ["FloatArray", "known_shape", "positive", "within"]

FloatArray = NDArray[np.float64]


def positive(**values: ArrayLike) -> list[FloatArray]:
    """Return the values as float arrays, or refuse what is not positive and finite.

    Parameters
    ----------
    **values : array-like
        Named values; the name is used in the message.

    Returns
    -------
    list of ndarray
        In the order given.

    Raises
    ------
    PhysicsRangeError
        If any entry is not finite or not above zero.

    Examples
    --------
    >>> positive(diameter_nm=2)
    [array(2.)]
    """
    return [within(name, value, 0.0, np.inf) for name, value in values.items()]


def within(name: str, value: ArrayLike, low: float, high: float) -> FloatArray:
    """Return a value as a float array, or refuse what is outside an open interval.

    Parameters
    ----------
    name : str
        Used in the message.
    value : array-like
        Any shape.
    low, high : float
        Both ends are excluded.

    Returns
    -------
    ndarray

    Raises
    ------
    PhysicsRangeError
        If any entry is outside, or not a number.

    Examples
    --------
    >>> within("specularity", 0.5, -0.1, 1.0)
    array(0.5)
    """
    array = np.asarray(value, dtype=np.float64)
    inside = (array > low) & (array < high)
    if not np.all(inside):
        found = array.ravel()[~inside.ravel()][0]
        raise PhysicsRangeError(
            explain(
                f"{name} out of range", expected=f"above {low:g}, below {high:g}", found=f"{found}"
            )
        )
    return array


def known_shape(shape: str, factors: dict[str, float]) -> float:
    """Return the factor of a shape, or refuse a shape that has none.

    Parameters
    ----------
    shape : str
        Name of the shape.
    factors : dict of str to float
        Factor of each shape that the formula knows.

    Returns
    -------
    float

    Raises
    ------
    PhysicsRangeError
        If the shape is unknown.

    Examples
    --------
    >>> known_shape("wire", {"sphere": 1.0, "wire": 0.5})
    0.5
    """
    if shape not in factors:
        raise PhysicsRangeError(explain("unknown shape", expected=", ".join(factors), found=shape))
    return factors[shape]
