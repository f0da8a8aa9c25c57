"""The exact step of a damped oscillator under a force held constant."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

# Below this (omega + decay) h the power series has converged to rounding after TERMS terms.
_SERIES = 0.5
_TERMS = 18
# Kept bits of the mantissa: a last bit of the mathematics library must not seed a different run.
MANTISSA = 40


@dataclass(frozen=True, slots=True)
class Propagator:
    """Coefficients (n,) of one step h; with ``r = f - w2 q``:

    ``q += c r + d v`` and ``v += d r - g v``, where c is the step response after h, d the impulse response
    and ``g = 2 a d + w2 c``. This is the matrix exponential, written without cancellation.
    """

    step_s: float
    w2: Array
    c: Array
    d: Array
    g: Array


def propagator(omega: Array, decay: Array, step_s: float, *, bits: int | None = MANTISSA) -> Propagator:
    """Coefficients of ``q'' + 2 a q' + w^2 q = f`` over a step with f constant.

    Parameters
    ----------
    omega, decay : Array
        (n,) undamped angular frequency w, rad/s, and decay rate a, 1/s; both may be zero, and a may
        exceed w.
    step_s : float
        Step h, s.
    bits : int, optional
        Bits of the mantissa to keep; None keeps all.

    Returns
    -------
    Propagator
        Coefficients of the step.

    References
    ----------
    Meirovitch, Fundamentals of Vibrations (2001), ch. 3: step and impulse response.
    """
    omega, decay = np.asarray(omega, dtype=np.float64), np.asarray(decay, dtype=np.float64)
    c, d = np.empty_like(omega), np.empty_like(omega)
    short = (omega + decay) * step_s < _SERIES
    c[short], d[short] = _series(omega[short], decay[short], step_s)
    rest = ~short
    c[rest], d[rest] = _closed(omega[rest], decay[rest], step_s)
    g = 2.0 * decay * d + omega**2 * c
    if bits is not None:
        c, d, g = _rounded(c, bits), _rounded(d, bits), _rounded(g, bits)
    return Propagator(step_s, omega**2, c, d, g)


def _series(omega: Array, decay: Array, step_s: float) -> tuple[Array, Array]:
    # Power series of x'' + 2 a x' + w^2 x = 1 from rest: c = x(h), d = x'(h).
    damp, stiff = 2.0 * decay * step_s, (omega * step_s) ** 2
    before, last = np.zeros_like(omega), np.zeros_like(omega)
    c, d = np.zeros_like(omega), np.zeros_like(omega)
    for n in range(_TERMS):
        push = 1.0 if n == 0 else 0.0
        term = (push - damp * (n + 1) * last - stiff * before) / ((n + 2) * (n + 1))
        before, last = last, term
        c += term
        d += (n + 2) * term
    return c * step_s**2, d * step_s


def _closed(omega: Array, decay: Array, step_s: float) -> tuple[Array, Array]:
    turn = np.sqrt(np.abs((omega - decay) * (omega + decay))) * step_s
    over = decay > omega
    fade = decay * step_s
    # E C and E S of the closed form; the hyperbolic pair is written so that nothing overflows.
    slow, fast = np.exp(np.where(over, turn, 0.0) - fade), np.exp(-np.where(over, turn, 0.0) - fade)
    cosine = np.where(over, 0.5 * (slow + fast), slow * np.cos(turn))
    near = turn < 1e-4
    safe = np.where(near, 1.0, turn)
    sinh = 0.5 * (slow - fast) / safe
    sine = np.where(over, sinh, slow * np.sin(turn) / safe)
    sine = np.where(near, np.exp(-fade) * (1.0 + np.where(over, 1.0, -1.0) * turn**2 / 6.0), sine)
    d = step_s * sine
    half = np.where(over, 1.0 - cosine, -np.expm1(-fade) + 2.0 * np.exp(-fade) * np.sin(0.5 * turn) ** 2)
    stiff = np.where(omega > 0.0, omega, 1.0)
    c = (half - decay * d) / stiff**2
    # Without stiffness the step response is that of a mass in a viscous bath.
    bath = np.where(decay > 0.0, decay, 1.0)
    return np.where(omega > 0.0, c, (step_s - d) / (2.0 * bath)), d


def _rounded(values: Array, bits: int) -> Array:
    mantissa, exponent = np.frexp(values)
    scale = 2.0**bits
    return np.asarray(np.ldexp(np.round(mantissa * scale) / scale, exponent))
