"""Cross-sections of bars, tubes and strings: area, second moments, torsion and shear.

Body frame: x along the line, y up (height), z across (width).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

# Terms of the torsion series; the 24th is below 1e-8 of the sum for every aspect ratio.
_TERMS = 24
# Relaxation times of a solid round and a solid flat section in bending, as thickness**2 / (number * diffusivity):
# Zener, Phys. Rev. 53 (1938) 90: f0 = 2.16 D/d**2 for the round wire, pi D/(2 h**2) for the flat strip.
_ROUND_RELAXATION = 2.0 * np.pi * 2.16
_FLAT_RELAXATION = np.pi**2


@dataclass(frozen=True, slots=True)
class Section:
    """Properties at stations along a line; every array has one entry a station.

    ``area`` m^2; ``up`` and ``across``: second moments (m^4) for bending along y and along z;
    ``torsion_pa`` the torsional rigidity G J, N m^2; ``shear_up``, ``shear_across``: shear coefficients;
    ``relax_up``, ``relax_across``: thermoelastic relaxation times the diffusivity, m^2;
    ``height``, ``width``: outer sizes, m.
    """

    area: Array
    up: Array
    across: Array
    torsion: Array
    shear_up: float
    shear_across: float
    relax_up: Array
    relax_across: Array
    height: Array
    width: Array


def torsion_constant(width: Array, height: Array) -> Array:
    """St-Venant torsion constant of a rectangle, m^4, to 1e-8.

    References
    ----------
    Timoshenko & Goodier, Theory of Elasticity, sec. 109.
    """
    long, short = np.maximum(width, height), np.minimum(width, height)
    ratio = np.divide(short, long, out=np.zeros_like(long), where=long > 0.0)
    total = np.zeros_like(ratio)
    for odd in range(1, 2 * _TERMS, 2):
        with np.errstate(divide="ignore", over="ignore"):
            total += np.tanh(0.5 * odd * np.pi / np.where(ratio > 0.0, ratio, 1e-300)) / odd**5
    constant: Array = long * short**3 * (1.0 / 3.0 - 64.0 / np.pi**5 * ratio * total)
    return constant


def rectangle(width: Array, height: Array, *, shear_up_pa: float, shear_across_pa: float, poisson: float) -> Section:
    """A solid rectangle; ``torsion`` is returned as G J with direction-dependent shear moduli.

    The orthotropic torsion problem is the isotropic one on stretched sides. Shear coefficient: Cowper,
    J. Appl. Mech. 33 (1966) 335.
    """
    mean = np.sqrt(shear_up_pa * shear_across_pa)
    stretched = torsion_constant(width * np.sqrt(shear_up_pa / mean), height * np.sqrt(shear_across_pa / mean))
    kappa = 10.0 * (1.0 + poisson) / (12.0 + 11.0 * poisson)
    return Section(
        area=width * height,
        up=width * height**3 / 12.0,
        across=height * width**3 / 12.0,
        torsion=mean * stretched,
        shear_up=kappa,
        shear_across=kappa,
        relax_up=height**2 / _FLAT_RELAXATION,
        relax_across=width**2 / _FLAT_RELAXATION,
        height=height,
        width=width,
    )


def round_section(outer: Array, inner: Array, *, shear_pa: float, poisson: float) -> Section:
    """A solid or hollow circle; shear coefficient of the hollow circle after Cowper (1966)."""
    second = np.pi / 64.0 * (outer**4 - inner**4)
    bore = float(np.max(inner / outer))
    square = (1.0 + bore**2) ** 2
    kappa = 6.0 * (1.0 + poisson) * square / ((7.0 + 6.0 * poisson) * square + (20.0 + 12.0 * poisson) * bore**2)
    # In a thin tube heat flows round the wall: one wave round the mean radius.
    solid = outer**2 / _ROUND_RELAXATION
    ringed = (0.25 * (outer + inner)) ** 2
    relax = np.where(inner > 0.0, ringed, solid)
    return Section(
        area=np.pi / 4.0 * (outer**2 - inner**2),
        up=second,
        across=second,
        torsion=shear_pa * 2.0 * second,
        shear_up=kappa,
        shear_across=kappa,
        relax_up=relax,
        relax_across=relax,
        height=outer,
        width=outer,
    )
