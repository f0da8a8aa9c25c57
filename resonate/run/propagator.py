"""The exact motion of a damped mode over one step of constant force.

    [q, v] -> [[e11, e12], [e21, e22]] [q, v] + f [c, d]

References
----------
Any text on linear vibration gives the matrix exponential; the form of 1 - e11 without cancellation is ours.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    ComplexArray = NDArray[np.complex128]

# Coefficients keep this many bits, so that the last bit of a library's sine does not seed chaos.
_BITS = 40
# Angles a step below which series are better than sines, and frequencies that are none.
_SMALL, _SLOW = 1e-4, 1e-5


@dataclass(frozen=True, slots=True)
class Coefficients:
    """Coefficients (n,) of every mode for one step, see the module's matrix."""

    e11: Array
    e12: Array
    e21: Array
    e22: Array
    c: Array
    d: Array

    def stacked(self) -> Array:
        """(6, n) in the order of the fields."""
        return np.ascontiguousarray(np.stack((self.e11, self.e12, self.e21, self.e22, self.c, self.d)))


def _rounded(values: Array) -> Array:
    mantissa, exponent = np.frexp(values)
    return np.ldexp(np.round(mantissa * 2.0**_BITS) * 2.0**-_BITS, exponent)


def coefficients(omega: Array, decay: Array, step_s: float, *, rounded: bool = True) -> Coefficients:
    """Exact step of every mode, under-, over- or critically damped, or without stiffness.

    Parameters
    ----------
    omega, decay : Array
        (n,) undamped angular frequency and decay rate, 1/s, both >= 0.
    step_s : float
        Length of the step, s.
    rounded : bool
        Keep 40 bits of each coefficient.
    """
    h = step_s
    shrink = np.exp(-decay * h)
    square = omega**2 - decay**2
    root = np.sqrt(np.abs(square))
    angle = root * h
    small = angle < _SMALL
    safe = np.where(root > 0.0, root, 1.0)
    even = 1.0 - np.sign(square) * angle**2 / 6.0 + angle**4 / 120.0
    with np.errstate(over="ignore"):
        sine = np.where(small, h * even, np.where(square > 0.0, np.sin(angle), np.sinh(angle)) / safe)
        cosine = np.where(square > 0.0, np.cos(angle), np.cosh(angle))
        half = np.where(square > 0.0, np.sin(0.5 * angle) ** 2, -(np.sinh(0.5 * angle) ** 2))
        missing = -np.expm1(-decay * h) + 2.0 * shrink * half - shrink * decay * sine
    stiff = omega > 0.0
    series = 0.5 * h**2 * (1.0 - 2.0 * decay * h / 3.0)
    c = np.where(stiff & (omega * h > _SLOW), missing / np.where(stiff, omega, 1.0) ** 2, series)
    drag = np.where(decay > 0.0, -np.expm1(-2.0 * decay * h) / np.where(decay > 0.0, 2.0 * decay, 1.0), h)
    # Without stiffness the mode only coasts against its drag.
    found = (
        np.where(stiff, shrink * (cosine + decay * sine), 1.0),
        np.where(stiff, shrink * sine, drag),
        np.where(stiff, -(omega**2) * shrink * sine, 0.0),
        np.where(stiff, shrink * (cosine - decay * sine), np.exp(-2.0 * decay * h)),
        c,
        np.where(stiff, shrink * sine, drag),
    )
    return Coefficients(*(_rounded(part) if rounded else part for part in found))


def to_state(q: Array, v: Array, omega: Array, decay: Array) -> ComplexArray:
    """Complex state z = q' - conj(lambda) q of underdamped modes."""
    swing = np.sqrt(omega**2 - decay**2)
    return v + (decay + 1j * swing) * q


def from_state(z: ComplexArray, omega: Array, decay: Array) -> tuple[Array, Array]:
    """Displacement and velocity from the complex state; trailing axes of ``z`` follow the modes."""
    swing = np.sqrt(omega**2 - decay**2)
    shape = (-1,) + (1,) * (z.ndim - 1)
    swing, rate = swing.reshape(shape), decay.reshape(shape)
    q = z.imag / swing
    return q, z.real - rate * q


def exponents(omega: Array, decay: Array) -> ComplexArray:
    """Exponents lambda = -a + j sqrt(omega^2 - a^2), (m,)."""
    return -decay + 1j * np.sqrt(omega**2 - decay**2)


def energy(z: ComplexArray, omega: Array, decay: Array) -> Array:
    """Energy (m,), J, of each mode."""
    q, v = from_state(z, omega, decay)
    return 0.5 * (v**2 + (omega**2) * q**2)
