"""How the kernels refuse bad input: the value met, where it stands, the rule and the remedy.

Only helpers for error messages are here. What counts as plausible for one quantity is decided
in the module of that quantity. NaN never counts as bad: it stands for a missing value.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

__all__ = ["floats", "kelvin", "refuse", "refuse_negative", "refuse_not_positive"]

#: Colder than any air ever measured near the ground (184 K): below it a unit is wrong [K].
_LOWEST_PLAUSIBLE_TEMPERATURE = 173.15


def floats(values: ArrayLike) -> NDArray[np.float64]:
    """Values as an array of floats, without a copy where none is needed."""
    return np.asarray(values, dtype=np.float64)


def refuse(bad: NDArray[np.bool_], values: NDArray[np.float64], rule: str, remedy: str) -> None:
    """Raise ValueError if any value is marked bad.

    Parameters
    ----------
    bad : ndarray of bool
        Marks, same shape as `values`.
    values : ndarray
        The values, as they were met.
    rule : str
        What must hold, beginning with the parameter's name: ``"pressure must be positive [Pa]"``.
    remedy : str
        What to do, without a full stop.
    """
    if not np.any(bad):
        return
    first = int(np.flatnonzero(bad)[0])
    met = f"{values.reshape(-1)[first]:g}"
    if values.ndim:
        met += f" at position {first} ({np.count_nonzero(bad)} of {values.size} values)"
    raise ValueError(f"{rule}, got {met}; {remedy}")


def refuse_negative(name: str, values: ArrayLike, unit: str, remedy: str) -> NDArray[np.float64]:
    """Values as floats; ValueError if any is below zero."""
    array = floats(values)
    refuse(array < 0.0, array, f"{name} must not be negative [{unit}]", remedy)
    return array


def refuse_not_positive(
    name: str, values: ArrayLike, unit: str, remedy: str
) -> NDArray[np.float64]:
    """Values as floats; ValueError if any is zero or below."""
    array = floats(values)
    refuse(array <= 0.0, array, f"{name} must be positive [{unit}]", remedy)
    return array


def kelvin(name: str, temperature: ArrayLike) -> NDArray[np.float64]:
    """Temperatures as floats [K]; ValueError if any looks like degrees Celsius."""
    array = floats(temperature)
    refuse(
        array < _LOWEST_PLAUSIBLE_TEMPERATURE,
        array,
        f"{name} must be in kelvin, at least {_LOWEST_PLAUSIBLE_TEMPERATURE:g}",
        "add 273.15 if it is in degrees Celsius",
    )
    return array
