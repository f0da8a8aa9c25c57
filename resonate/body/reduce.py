"""Energies over the freedoms that the supports leave."""

from __future__ import annotations

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
