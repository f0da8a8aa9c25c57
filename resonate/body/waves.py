"""How short the waves are: what a mesh must resolve."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    Array = NDArray[np.float64]


def bending_wavenumber(
    omega: float, *, stiffness: Array, inertia: Array, turning: Array, shear: Array, pull: Array | float = 0.0
) -> Array:
    """Wavenumber of the slow branch of a shear-flexible line or plate under tension, rad/m.

    Parameters
    ----------
    omega : float
        Angular frequency, rad/s.
    stiffness, inertia, turning, shear, pull : Array
        E I (or D), mass, rotary inertia, kappa G A and tension, each per length (or area) of the wave front.

    References
    ----------
    Mindlin, J. Appl. Mech. 18 (1951) 31; Graff, Wave Motion in Elastic Solids, ch. 3.
    """
    stiff = np.maximum(stiffness, 1e-300)
    slow = omega**2 * (turning + stiff * inertia / shear) - pull
    fast = omega**2 * inertia * (1.0 - omega**2 * turning / shear)
    inside = np.maximum(slow**2 + 4.0 * stiff * fast, 0.0)
    # The stable root: no cancellation where tension outweighs bending.
    square = np.where(
        slow >= 0.0,
        (slow + np.sqrt(inside)) / (2.0 * stiff),
        2.0 * fast / np.where(slow < 0.0, np.sqrt(inside) - slow, 1.0),
    )
    return np.sqrt(np.maximum(square, 0.0))


def top_frequency(count: Callable[[float], float], *, wanted: int, highest_hz: float) -> float:
    """Frequency, at most ``highest_hz``, below which about ``wanted`` modes are expected."""
    if count(highest_hz) <= wanted:
        return highest_hz
    low, high = 0.0, highest_hz
    for _ in range(60):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if count(middle) < wanted else (low, middle)
    return high
