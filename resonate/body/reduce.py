"""Energies over the freedoms that the supports leave."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from resonate.body.body import Forms, HeatForm

if TYPE_CHECKING:
    from scipy.sparse import csr_matrix

    from resonate.body.support import Supports


def _project(matrix: csr_matrix, basis: csr_matrix) -> csr_matrix:
    small = (basis.T @ matrix @ basis).tocsr()
    return (0.5 * (small + small.T)).tocsr()


def reduced(stiffness: csr_matrix, mass: csr_matrix, held: Supports, heat: tuple[HeatForm, ...]) -> Forms:
    """Add springs and cords, then keep what the constraints allow."""
    basis = held.basis
    total = stiffness
    for part in (held.springs, held.cords):
        if part is not None:
            total = total + part
    return Forms(
        stiffness=_project(total, basis),
        mass=_project(mass, basis),
        basis=basis,
        cords=None if held.cords is None else _project(held.cords, basis),
        springs=None if held.springs is None else _project(held.springs, basis),
        damper_rows=(held.damper_rows @ basis).tocsr(),
        damper_ns_m=held.damper_ns_m,
        heat=tuple(HeatForm((form.operator @ basis).tocsr(), form.relaxation_s) for form in heat),
    )


# Bending beyond this share of the thickness stretches the middle face (Chu & Herrmann, J. Appl. Mech. 23 (1956) 532).
_BENT = 0.3
# Rise of tension, by share, above which the pitch of a string or skin is heard to glide (twice the 1 % of
# 0.1 ERB at mid frequencies: Jarvelainen & Valimaki 2001).
_PULLED = 0.02


def bending_reach_m(thickness_m: float) -> float:
    """Deflection of a bar or plate above which linear bending is not enough, m."""
    return _BENT * thickness_m


def tension_reach_m(strain: float, span_m: float) -> float:
    """Deflection of a string or skin that raises its tension by 2 %, m.

    ``strain`` it is stretched by at rest; ``span_m`` between its supports. Half a wave of height A over the span
    lengthens it by the share (pi A/(2 span))^2.
    """
    return float(2.0 * span_m / math.pi * math.sqrt(_PULLED * strain))
