"""The exact motion of a damped mode over one step of constant force.

With ``r = f - w^2 q`` the matrix exponential is ``q += c r + d v`` and ``v += d r - g v``, where c and d are the
step and impulse response after the step and ``g = 2 a d + w^2 c``. Written as changes, slow modes lose no digits.

References
----------
Meirovitch, Fundamentals of Vibrations (2001), ch. 3: step and impulse response of a damped oscillator.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    ComplexArray = NDArray[np.complex128]

# Coefficients keep this many bits, so that the last bit of a library's sine does not seed chaos. Forty would let
# modes without loss gain 1.5e-12 of the energy in a step.
_BITS = 44
# Below this (omega + decay) h a power series of _TERMS terms has converged to rounding.
_SERIES = 0.5
_TERMS = 18
# Below this angle its sine is that angle, to rounding.
_SMALL = 1e-4


@dataclass(frozen=True, slots=True)
class Coefficients:
    """Coefficients (n,) of every mode for one step; see the module."""

    w2: Array
    c: Array
    d: Array
    g: Array

    def stacked(self) -> Array:
        """(4, n) in the order of the fields."""
        return np.ascontiguousarray(np.stack((self.w2, self.c, self.d, self.g)))


def coefficients(omega: Array, decay: Array, step_s: float, *, rounded: bool = True) -> Coefficients:
    """Exact step of every mode, under-, over- or critically damped, or without stiffness.

    Parameters
    ----------
    omega, decay : Array
        (n,) undamped angular frequency and decay rate, 1/s, both >= 0.
    step_s : float
        Length of the step, s.
    rounded : bool
        Keep 44 bits of each coefficient.
    """
    c, d = np.empty_like(omega), np.empty_like(omega)
    short = (omega + decay) * step_s < _SERIES
    c[short], d[short] = _series(omega[short], decay[short], step_s)
    c[~short], d[~short] = _closed(omega[~short], decay[~short], step_s)
    found = (c, d, 2.0 * decay * d + omega**2 * c)
    return Coefficients(omega**2, *(_rounded(part) if rounded else part for part in found))


def _series(omega: Array, decay: Array, step_s: float) -> tuple[Array, Array]:
    # x'' + 2 a x' + w^2 x = 1 from rest, in powers of the time: c = x(h), d = x'(h).
    drag, stiff = 2.0 * decay * step_s, (omega * step_s) ** 2
    before, last = np.zeros_like(omega), np.zeros_like(omega)
    c, d = np.zeros_like(omega), np.zeros_like(omega)
    for n in range(_TERMS):
        term = ((n == 0) - drag * (n + 1) * last - stiff * before) / ((n + 2) * (n + 1))
        before, last = last, term
        c += term
        d += (n + 2) * term
    return c * step_s**2, d * step_s


def _closed(omega: Array, decay: Array, step_s: float) -> tuple[Array, Array]:
    fade, over, stiff = decay * step_s, decay > omega, omega > 0.0
    angle = np.sqrt(np.abs((omega - decay) * (omega + decay))) * step_s
    # Overdamped: both exponentials fall, so that nothing overflows.
    slow, fast = np.exp(np.where(over, angle, 0.0) - fade), np.exp(np.where(over, -angle, 0.0) - fade)
    safe = np.where(angle < _SMALL, 1.0, angle)
    sine = np.where(over, 0.5 * (slow - fast), slow * np.sin(angle)) / safe
    sine = np.where(angle < _SMALL, np.exp(-fade), sine)
    half = np.where(over, 1.0 - 0.5 * (slow + fast), -np.expm1(-fade) + 2.0 * np.exp(-fade) * np.sin(0.5 * angle) ** 2)
    d = step_s * sine
    c = (half - decay * d) / np.where(stiff, omega, 1.0) ** 2
    strong = over & (angle > 1.0)
    c[strong] = _creep(omega[strong], decay[strong], step_s)
    return c, d


def _creep(omega: Array, decay: Array, step_s: float) -> Array:
    # Step response of two well separated exponentials; the slow one may have no rate at all.
    spread = np.sqrt((decay - omega) * (decay + omega))
    fast = decay + spread
    slow = omega**2 / fast
    still = slow * step_s < 1e-300  # noqa: PLR2004 (no division by zero)
    crept = np.where(still, step_s, -np.expm1(-slow * step_s) / np.where(still, 1.0, slow))
    return np.asarray((crept + np.expm1(-fast * step_s) / fast) / (2.0 * spread))


def _rounded(values: Array) -> Array:
    mantissa, exponent = np.frexp(values)
    return np.asarray(np.ldexp(np.round(mantissa * 2.0**_BITS) * 2.0**-_BITS, exponent))


def to_state(q: Array, v: Array, omega: Array, decay: Array) -> ComplexArray:
    """Complex state z = q' - conj(lambda) q of underdamped modes."""
    swing = np.sqrt((omega - decay) * (omega + decay))
    return np.asarray(v + (decay + 1j * swing) * q)


def from_state(z: ComplexArray, omega: Array, decay: Array) -> tuple[Array, Array]:
    """Displacement and velocity from the complex state; trailing axes of ``z`` follow the modes."""
    swing = np.sqrt((omega - decay) * (omega + decay))
    shape = (-1,) + (1,) * (z.ndim - 1)
    swing, rate = swing.reshape(shape), decay.reshape(shape)
    q = z.imag / swing
    return q, z.real - rate * q


def exponents(omega: Array, decay: Array) -> ComplexArray:
    """Exponents lambda = -a + j sqrt(omega^2 - a^2), (m,)."""
    return np.asarray(-decay + 1j * np.sqrt((omega - decay) * (omega + decay)))


def energy(z: ComplexArray, omega: Array, decay: Array) -> Array:
    """Energy (m,), J, of each mode."""
    q, v = from_state(z, omega, decay)
    return np.asarray(0.5 * (v**2 + (omega**2) * q**2))
