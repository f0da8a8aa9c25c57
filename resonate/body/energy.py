"""Kinetic and potential energy as sparse quadratic forms: the one mechanism behind every shape.

A term of the energy is ``1/2 * integral of strain^T law strain``, where each strain is a sum of fields and of
their slopes. Its second derivative with respect to the nodal values is the sparse matrix assembled here: with
velocities in place of strains it is the mass.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.sparse import coo_matrix, csr_matrix
from scipy.sparse.csgraph import connected_components

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from resonate.body.spectral import Grid, Quadrature

    Array = NDArray[np.float64]


# Couplings below this are round-off.
_ROUNDING = 1e-14
# A constraint whose own part is less than this share of the others' says nothing new.
_INDEPENDENT = 1e-10


@dataclass(frozen=True, slots=True)
class Strain:
    """A linear map from fields and slopes to strains.

    ``fields`` (a, f): gain of field f in strain a; ``slopes`` (a, f, dim): gain of its derivative.
    """

    fields: Array
    slopes: Array

    @classmethod
    def of(cls, fields: int, dimension: int, *rows: Mapping[tuple[int, int | None], float]) -> Strain:
        """Build from one dictionary a strain: (field, direction or None for the field itself) -> gain."""
        value = np.zeros((len(rows), fields))
        slope = np.zeros((len(rows), fields, dimension))
        for number, row in enumerate(rows):
            for (field, direction), gain in row.items():
                if direction is None:
                    value[number, field] = gain
                else:
                    slope[number, field, direction] = gain
        return cls(value, slope)

    @classmethod
    def still(cls, fields: int, dimension: int) -> Strain:
        """Give each field itself: with velocities, what is moved."""
        return cls(np.eye(fields), np.zeros((fields, fields, dimension)))


def strain_matrix(strain: Strain, at: Quadrature) -> Array:
    """Strains (e, q, a, k * f) of unit nodal values, node-major."""
    count, fields = strain.fields.shape
    elements, points, nodes = at.slope.shape[:3]
    local = np.zeros((elements, points, count, nodes, fields))
    for row, field in zip(*np.nonzero(strain.fields), strict=True):
        local[:, :, row, :, field] += strain.fields[row, field] * at.value
    for row, field, direction in zip(*np.nonzero(strain.slopes), strict=True):
        local[:, :, row, :, field] += strain.slopes[row, field, direction] * at.slope[..., direction]
    return local.reshape(elements, points, count, nodes * fields)


def freedoms(grid: Grid, fields: int) -> NDArray[np.int64]:
    """Global numbers (e, k * f) of each element's nodal values."""
    return (grid.elements[:, :, None] * fields + np.arange(fields)).reshape(len(grid.elements), -1)


def _coupled(strain: Strain, law: Array) -> list[NDArray[np.int64]]:
    """Groups of fields that no term ties together, each small enough to be assembled apart."""
    uses = (np.abs(strain.fields) + np.abs(strain.slopes).sum(axis=2)) > 0.0
    tied = np.abs(law).reshape(-1, *law.shape[-2:]).max(axis=0) > 0.0
    graph = (uses.T.astype(np.int64) @ tied.astype(np.int64) @ uses.astype(np.int64)) > 0
    _, group = connected_components(csr_matrix(graph), directed=False)
    return [np.flatnonzero(group == number) for number in range(int(group.max()) + 1)]


def assemble(grid: Grid, at: Quadrature, strain: Strain, law: Array) -> csr_matrix:
    """Second derivative of ``1/2 integral strain^T law strain``.

    Parameters
    ----------
    grid, at : Grid, Quadrature
        Elements and their integration points.
    strain : Strain
        What is strained (or moved).
    law : Array
        (a, a) or (e, q, a, a), symmetric: stiffness, or density, per unit length or area.

    Returns
    -------
    csr_matrix
        (n * f, n * f), symmetric to round-off.
    """
    fields = strain.fields.shape[1]
    values, rows, columns = [], [], []
    for group in _coupled(strain, law):
        uses = (np.abs(strain.fields[:, group]) + np.abs(strain.slopes[:, group]).sum(axis=2)).sum(axis=1) > 0.0
        part = Strain(strain.fields[np.ix_(uses, group)], strain.slopes[uses][:, group])
        blocks = _element_blocks(at, part, law[..., uses, :][..., uses])
        numbers = (grid.elements[:, :, None] * fields + group).reshape(len(grid.elements), -1)
        keep = blocks.ravel() != 0.0
        values.append(blocks.ravel()[keep])
        rows.append(np.broadcast_to(numbers[:, :, None], blocks.shape).ravel()[keep])
        columns.append(np.broadcast_to(numbers[:, None, :], blocks.shape).ravel()[keep])
    size = len(grid.nodes_m) * fields
    entries = (np.concatenate(values), (np.concatenate(rows), np.concatenate(columns)))
    return coo_matrix(entries, shape=(size, size)).tocsr()


def _element_blocks(at: Quadrature, strain: Strain, law: Array) -> Array:
    local = strain_matrix(strain, at)
    elements, points, count, width = local.shape
    weighted = law * at.weight[..., None, None]
    stressed = np.matmul(weighted, local)
    stacked = (elements, points * count, width)
    blocks = local.reshape(stacked).transpose(0, 2, 1) @ stressed.reshape(stacked)
    symmetric: Array = 0.5 * (blocks + blocks.transpose(0, 2, 1))
    return symmetric


def sample(grid: Grid, at: Quadrature, strain: Strain, gain: Array) -> csr_matrix:
    """Strains at every integration point as rows (e * q * a, n * f), each times ``gain`` (e, q, a)."""
    local = strain_matrix(strain, at) * gain[..., None]
    elements, points, count, width = local.shape
    numbers = freedoms(grid, strain.fields.shape[1])
    columns = np.broadcast_to(numbers[:, None, None, :], local.shape).ravel()
    rows = np.repeat(np.arange(elements * points * count), width)
    size = len(grid.nodes_m) * strain.fields.shape[1]
    keep = local.ravel() != 0.0
    shape = (elements * points * count, size)
    return csr_matrix(coo_matrix((local.ravel()[keep], (rows[keep], columns[keep])), shape=shape))


def eliminate(rows: csr_matrix, size: int) -> csr_matrix:
    """Basis (size, f) of all nodal values that keep ``rows @ u = 0``.

    Constraints that share no freedom are treated apart, so that the basis stays sparse. In each group as many
    freedoms as there are independent constraints are expressed by the others.
    """
    rows = csr_matrix(rows, copy=True)
    rows.sum_duplicates()
    rows.eliminate_zeros()
    rows = rows[np.diff(rows.indptr) > 0]
    touched = np.unique(rows.indices)
    small = rows[:, touched]
    graph = (abs(small).T @ abs(small)).tocsr()
    _, group = connected_components(graph, directed=False)
    members = np.bincount(group)
    group_of_row = group[small.indices[small.indptr[:-1]]]
    # A freedom that only constraints of its own touch is zero.
    dependent = [touched[members[group] == 1]]
    entries: list[tuple[NDArray[np.int64], NDArray[np.int64], Array]] = []
    for number in np.flatnonzero(members > 1):
        columns = np.flatnonzero(group == number)
        dense = small[np.flatnonzero(group_of_row == number)][:, columns].toarray()
        rank, pivot, link = _dependence(dense)
        chosen, rest = touched[columns[pivot[:rank]]], touched[columns[pivot[rank:]]]
        dependent.append(chosen)
        entries.append((np.repeat(chosen, len(rest)), np.tile(rest, rank), link.ravel()))
    free = np.setdiff1d(np.arange(size), np.concatenate(dependent))
    place = np.full(size, -1, dtype=np.int64)
    place[free] = np.arange(len(free))
    row = np.concatenate([free, *(entry[0] for entry in entries)])
    column = place[np.concatenate([free, *(entry[1] for entry in entries)])]
    value = np.concatenate([np.ones(len(free)), *(entry[2] for entry in entries)])
    keep = value != 0.0
    return csr_matrix((value[keep], (row[keep], column[keep])), shape=(size, len(free)))


def _dependence(dense: Array) -> tuple[int, NDArray[np.int64], Array]:
    """Rank r, an order of the columns, and (r, rest): the first r columns' unknowns from the others'."""
    from scipy.linalg import qr, solve_triangular

    _, upper, pivot = qr(dense, mode="economic", pivoting=True)
    diagonal = np.abs(np.diag(upper))
    rank = int(np.sum(diagonal > _INDEPENDENT * diagonal[0]))
    link = -solve_triangular(upper[:rank, :rank], upper[:rank, rank:])
    link[np.abs(link) < _ROUNDING] = 0.0
    return rank, pivot, link
