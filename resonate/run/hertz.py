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
from scipy.special import ellipkm1, elliprd, gamma

from resonate.errors import RunError

# Power p of F = K delta^p.
_EXPONENT = 1.5
# Curvatures whose relative difference is smaller than this press a circle, to rounding.
_ROUND = 1e-9
# Restitution above which the damping is found from a power series, and its length.
_ELASTIC = 0.98
_TERMS = 14


@dataclass(frozen=True, slots=True)
class Pulse:
    """An elastic impact: ``depth_m`` and ``force_n`` at the deepest, ``duration_s``."""

    depth_m: float
    force_n: float
    duration_s: float


@dataclass(frozen=True, slots=True)
class Local:
    """What one point of contact gives.

    ``stiffness`` K of F = K delta^1.5, N/m^1.5; ``spread_m_half``: mean radius of the patch (of the circle of equal
    area) over the square root of the penetration, m^0.5.
    """

    stiffness: float
    spread_m_half: float

    def patch_m(self, depth_m: float) -> float:
        """Radius of the patch at a penetration."""
        return float(self.spread_m_half * np.sqrt(max(depth_m, 0.0)))


def reduced_modulus(young_pa: tuple[float, float], poisson: tuple[float, float]) -> float:
    """E*, Pa: 1/E* = (1 - nu1^2)/E1 + (1 - nu2^2)/E2; an infinite modulus does not give."""
    give = sum((1.0 - nu**2) / young for young, nu in zip(young_pa, poisson, strict=True))
    return 1.0 / give


def local(modulus_pa: float, tip_radius_m: float, curvature_1_m: tuple[float, float], *, where: str) -> Local:
    """Contact between a round tip and a surface of two principal curvatures.

    Parameters
    ----------
    modulus_pa : float
        Reduced modulus E*.
    tip_radius_m : float
        Radius of the tip.
    curvature_1_m : tuple[float, float]
        Principal curvatures of the surface, positive where convex, 1/m.
    where : str
        Who strikes what, for the error.

    Raises
    ------
    RunError
        If the tip does not fit into a hollow of the surface.

    Notes
    -----
    Johnson (1985) eqs. 4.24 to 4.28: an elliptic patch, whose shape follows from the ratio of the relative
    curvatures. A circle gives the familiar (4/3) E* sqrt(R).
    """
    flat, sharp = sorted(1.0 / tip_radius_m + k for k in curvature_1_m)
    if flat <= 0.0:
        raise RunError(
            what=f"a tip of radius {tip_radius_m:g} m is too blunt for a hollow of radius "
            f"{-1.0 / min(curvature_1_m):g} m",
            where=where,
            fix="give the striker a smaller tip_radius, or strike elsewhere",
        )
    radius = 1.0 / np.sqrt(sharp * flat)
    circle = 4.0 / 3.0 * modulus_pa * np.sqrt(radius)
    if sharp - flat < _ROUND * sharp:
        return Local(float(circle), float(np.sqrt(radius)))
    ratio = flat / sharp

    def miss(log_square: float) -> float:
        squash, stretch = _integrals(float(np.exp(log_square)))
        return squash / stretch - ratio

    # The unknown is the squared ratio of the axes of the patch.
    square = float(np.exp(brentq(miss, -200.0, 0.0, xtol=1e-15, rtol=1e-14)))
    squash, stretch = _integrals(square)
    f1 = (4.0 / np.pi * square**0.75 * np.sqrt(stretch * squash)) ** (1.0 / 3.0)
    f2 = 2.0 / np.pi * square**0.25 / f1 * float(ellipkm1(square))
    return Local(float(circle * f2**-1.5), float(np.sqrt(radius / f2) * f1))


def _integrals(square: float) -> tuple[float, float]:
    # [K - E] / e^2 and [(a/b)^2 E - K] / e^2 with e^2 = 1 - square, by Carlson's R_D (DLMF 19.25.1): no cancellation.
    return float(elliprd(0.0, square, 1.0)) / 3.0, float(elliprd(0.0, 1.0, square)) / 3.0


def pulse(stiffness_n: float, mass_kg: float, speed_m_s: float) -> Pulse:
    """Deepest penetration, peak force and duration of an elastic impact (Johnson 1985, eqs. 11.22 to 11.24)."""
    power = _EXPONENT + 1.0
    depth = (power * mass_kg * speed_m_s**2 / (2.0 * stiffness_n)) ** (1.0 / power)
    share = np.sqrt(np.pi) * gamma(1.0 + 1.0 / power) / gamma(0.5 + 1.0 / power)
    return Pulse(float(depth), float(stiffness_n * depth**_EXPONENT), float(2.0 * depth / speed_m_s * share))


def loss(restitution: float, reference_speed_m_s: float) -> float:
    """Damping mu of F = K delta^p (1 + mu delta'), s/m, that gives ``restitution`` at the reference speed.

    Notes
    -----
    Exact for a mass on a rigid wall: d (1 + e) = ln((1 + d)/(1 - e d)) with d = mu v, whatever p and K (by
    integrating the equation of motion over the closed cycle of the penetration).
    """
    e = restitution
    if e >= 1.0:
        return 0.0
    if e > _ELASTIC:
        low, high = 1.0 - e, 2.0 * (1.0 - e)
        return float(brentq(_elastic, low, high, args=(e,), xtol=1e-300, rtol=1e-14)) / reference_speed_m_s
    # The unknown is y = -ln(1 - e d), which stays in range however small e is; d is never below 1 - e.
    low, high = -float(np.log1p(-e * (1.0 - e))), 2.0
    while _inelastic(high, e) > 0.0:
        high *= 2.0
    y = float(brentq(_inelastic, low, high, args=(e,), xtol=1e-14, rtol=1e-14))
    return float(-np.expm1(-y)) / e / reference_speed_m_s


def _elastic(d: float, e: float) -> float:
    # (1 + e) d - ln[(1 + d) / (1 - e d)] over d^2, as a power series.
    fade = np.log(e)
    terms = [-np.expm1(n * fade) if n % 2 == 0 else -1.0 - np.exp(n * fade) for n in range(2, _TERMS)]
    return float(sum(term * d ** (n - 2) / n for n, term in enumerate(terms, start=2)))


def _inelastic(y: float, e: float) -> float:
    d = -float(np.expm1(-y)) / e
    return float(d * (1.0 + e) - np.log1p(d) - y)
