"""Local stiffness, duration and loss of an elastic contact.

References
----------
Hertz, J. reine angew. Math. 92 (1882) 156; Johnson, Contact Mechanics (1985), sec. 4.2 and 11.4;
Hunt & Crossley, J. Appl. Mech. 42 (1975) 440.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.optimize import brentq
from scipy.special import ellipe, ellipk, gamma

# Curvatures whose ratio is closer to 1 than this press a circle.
_ROUND = 1e-6
_EXPONENT = 1.5


@dataclass(frozen=True, slots=True)
class Pulse:
    """An elastic impact: ``depth_m`` and ``force_n`` at the deepest, ``duration_s``."""

    depth_m: float
    force_n: float
    duration_s: float


def reduced_modulus(young_pa: tuple[float, float], poisson: tuple[float, float]) -> float:
    """E*, Pa: 1/E* = (1 - nu1^2)/E1 + (1 - nu2^2)/E2; an infinite modulus does not give."""
    give = sum((1.0 - nu**2) / young for young, nu in zip(young_pa, poisson, strict=True))
    return 1.0 / give


def stiffness(modulus_pa: float, tip_radius_m: float, curvature_1_m: tuple[float, float]) -> float:
    """K of F = K delta^1.5 between a round tip and a surface of two principal curvatures, N/m^1.5.

    Parameters
    ----------
    modulus_pa : float
        Reduced modulus E*.
    tip_radius_m : float
        Radius of the tip.
    curvature_1_m : tuple[float, float]
        Principal curvatures of the surface, positive where convex, 1/m.

    Notes
    -----
    Johnson (1985) eq. 4.24 to 4.28: an elliptic patch; the eccentricity follows from the ratio of the relative
    curvatures. A circle gives the familiar (4/3) E* sqrt(R).
    """
    tip = 1.0 / tip_radius_m
    sharp, flat = sorted((tip + curvature_1_m[0], tip + curvature_1_m[1]), reverse=True)
    # A hollow that fits the tip more closely than this is pressed as if it were this open.
    flat = max(flat, 1e-3 * sharp)
    radius = 1.0 / np.sqrt(sharp * flat)
    circle = 4.0 / 3.0 * modulus_pa * np.sqrt(radius)
    ratio = sharp / flat
    if ratio < 1.0 + _ROUND:
        return float(circle)

    def miss(square: float) -> float:
        first, second = ellipk(square), ellipe(square)
        axes = 1.0 / (1.0 - square)
        return float((axes * second - first) / (first - second) - ratio)

    square = brentq(miss, 1e-9, 1.0 - 1e-12, xtol=1e-15)
    first, second = ellipk(square), ellipe(square)
    slim = np.sqrt(1.0 - square)
    inside = (second / (1.0 - square) - first) * (first - second)
    f1 = (4.0 / (np.pi * square) * slim**3 * np.sqrt(inside)) ** (1.0 / 3.0)
    f2 = 2.0 / np.pi * np.sqrt(slim) / f1 * first
    return float(circle * f2**-1.5)


def pulse(stiffness_n: float, mass_kg: float, speed_m_s: float) -> Pulse:
    """Deepest penetration, peak force and duration of an elastic impact (Johnson 1985, eq. 11.24)."""
    power = _EXPONENT + 1.0
    depth = (power * mass_kg * speed_m_s**2 / (2.0 * stiffness_n)) ** (1.0 / power)
    share = np.sqrt(np.pi) * gamma(1.0 + 1.0 / power) / gamma(0.5 + 1.0 / power)
    return Pulse(float(depth), float(stiffness_n * depth**_EXPONENT), float(2.0 * depth / speed_m_s * share))


def loss(restitution: float, reference_speed_m_s: float) -> float:
    """Loss constant mu of F = K delta^p (1 + mu delta'), s/m, that gives ``restitution`` at the reference speed.

    Notes
    -----
    Exact for a mass on a rigid wall: d (1 + e) = ln((1 + d)/(1 - e d)) with d = mu v, whatever p and K (by
    integrating the equation of motion over the closed cycle of the penetration).
    """
    e = restitution
    if e >= 1.0:
        return 0.0
    if e <= 0.0:
        e = 1e-6

    def miss(log_d: float) -> float:
        d = np.exp(log_d)
        return float(d * (1.0 + e) - np.log1p(d) + np.log1p(-e * d))

    # Between the small-loss law 1.5 (1 - e) and the pole at 1/e.
    low, high = np.log(0.5 * (1.0 - e)), np.log(1.0 / e) + np.log1p(-1e-13)
    return float(np.exp(brentq(miss, low, high, xtol=1e-14))) / reference_speed_m_s
