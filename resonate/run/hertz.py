"""Local contact of a rounded tip: Hertz stiffness, impact time, and damping from restitution."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.optimize import brentq
from scipy.special import ellipkm1, elliprd, gamma

from resonate.errors import RunError

# Relative difference of the two curvatures below which the patch is taken as a circle.
_ROUND = 1e-9


@dataclass(frozen=True, slots=True)
class Hertz:
    """Point contact of two elastic bodies.

    ``stiffness`` K of ``F = K delta^1.5``, N/m^1.5; ``patch_m_half`` is the geometric mean radius of the patch
    over the square root of the indentation, m^0.5: ``radius = patch_m_half * sqrt(delta)``.
    """

    stiffness: float
    patch_m_half: float

    def radius_m(self, delta_m: float) -> float:
        """Geometric mean radius of the patch at an indentation."""
        return self.patch_m_half * max(delta_m, 0.0) ** 0.5


@dataclass(frozen=True, slots=True)
class Impact:
    """Lossless impact of a mass: largest indentation, duration, largest force."""

    delta_m: float
    time_s: float
    force_n: float


def effective_modulus(young_pa: tuple[float, float], poisson: tuple[float, float]) -> float:
    """Contact modulus E* of two materials, Pa; an infinite modulus does not give way.

    References
    ----------
    Johnson, Contact Mechanics (1985), eq. 4.6.
    """
    give = sum((1.0 - nu**2) / young for young, nu in zip(young_pa, poisson, strict=True))
    return 1.0 / give


def hertz(radius_m: float, curvature_1_m: tuple[float, float], modulus_pa: float, *, where: str) -> Hertz:
    """Stiffness of a spherical tip against a curved surface.

    Parameters
    ----------
    radius_m : float
        Radius of the tip.
    curvature_1_m : tuple[float, float]
        Principal curvatures of the surface, positive where it bulges.
    modulus_pa : float
        E* of the pair.
    where : str
        Who strikes what, for the error.

    Raises
    ------
    RunError
        If the tip is too blunt for a hollow of the surface.

    References
    ----------
    Johnson, Contact Mechanics (1985), sec. 4.2 and eqs. 4.24-4.28: elliptical contacts.
    """
    flat, sharp = sorted(0.5 * (1.0 / radius_m + k) for k in curvature_1_m)
    if flat <= 0.0:
        raise RunError(
            what=f"a tip of radius {radius_m:g} m is too blunt for a hollow of radius "
            f"{-1.0 / min(curvature_1_m):g} m",
            where=where,
            fix="give the striker a smaller tip_radius, or strike elsewhere",
        )
    mean_radius = 0.5 / np.sqrt(flat * sharp)
    if sharp - flat < _ROUND * sharp:
        return Hertz(4.0 / 3.0 * modulus_pa * np.sqrt(mean_radius), float(np.sqrt(mean_radius)))
    # m = (b/a)^2 of the patch from the ratio of the curvatures (Johnson 4.25), monotone in m.
    ratio = flat / sharp
    m = float(np.exp(brentq(lambda x: _ratio(np.exp(x)) - ratio, -200.0, 0.0, xtol=1e-15, rtol=1e-14)))
    stretch, squash, whole = _integrals(m)
    f1_cubed = 4.0 / np.pi * m**0.75 * np.sqrt(stretch * squash)
    f1 = f1_cubed ** (1.0 / 3.0)
    f2 = 2.0 / np.pi * m**0.25 / f1 * whole
    stiffness = 4.0 / 3.0 * modulus_pa * np.sqrt(mean_radius) * f2**-1.5
    return Hertz(float(stiffness), float(np.sqrt(mean_radius) * f1 / np.sqrt(f2)))


def _integrals(m: float) -> tuple[float, float, float]:
    # With e^2 = 1 - m: [(a/b)^2 E - K] / e^2, [K - E] / e^2 and K, by Carlson's R_D without cancellation.
    squash = elliprd(0.0, m, 1.0) / 3.0
    stretch = (elliprd(0.0, m, 1.0) + elliprd(0.0, 1.0, m)) / 3.0
    return float(stretch), float(squash), float(ellipkm1(m))


def _ratio(m: float) -> float:
    stretch, squash, _ = _integrals(m)
    return squash / stretch


def impact(mass_kg: float, speed_m_s: float, *, stiffness: float, exponent: float) -> Impact:
    """Lossless impact of a mass on a fixed contact ``F = K delta^p``.

    References
    ----------
    Johnson, Contact Mechanics (1985), eqs. 11.22-11.24 for p = 3/2.
    """
    p1 = exponent + 1.0
    delta = (p1 * mass_kg * speed_m_s**2 / (2.0 * stiffness)) ** (1.0 / p1)
    time = 2.0 * delta / speed_m_s * np.sqrt(np.pi) * gamma(1.0 + 1.0 / p1) / gamma(0.5 + 1.0 / p1)
    return Impact(float(delta), float(time), float(stiffness * delta**exponent))


def damping_number(restitution: float) -> float:
    """Solve ``d (1 + e) = ln[(1 + d) / (1 - e d)]`` for d = mu v, exactly.

    For a mass on a rigid wall with ``F = K delta^p (1 + mu delta')``, whatever K and p.

    References
    ----------
    Hunt & Crossley, J. Appl. Mech. 42 (1975) 440: the force. Papetti, Avanzini & Rocchesso, IEEE
    Trans. Audio Speech Lang. Process. 19 (2011) 2081: the exact relation.
    """
    e = restitution
    if not 0.0 < e <= 1.0:
        raise RunError(
            what=f"a restitution of {e!r}",
            where="striker",
            fix="give a restitution above 0 and at most 1",
        )
    if 1.0 - e < _ROUND:
        return 1.5 * (1.0 - e)
    # d = x / e keeps 1 - e d = 1 - x within (0, 1), and x close to 1 for small e.
    def left(y: float) -> float:
        x = -np.expm1(-y)
        d = x / e
        return float(d * (1.0 + e) - np.log1p(d) - y)

    high = 2.0
    while left(high) > 0.0:
        high *= 2.0
    y = float(brentq(left, 1e-12, high, xtol=1e-14, rtol=1e-14))
    return float(-np.expm1(-y) / e)
