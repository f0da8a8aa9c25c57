"""Linear elasticity in three dimensions: the law of a material, and its energies on solid elements.

The potential energy of a solid is ``1/2 integral strain : law : strain`` with the strain ``1/2 (grad u + grad u^T)``;
the kinetic energy ``1/2 integral density |velocity|^2``.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Protocol

import numpy as np
from scipy.sparse import bsr_matrix, coo_matrix, csr_matrix

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.spectral import Quadrature
    from resonate.scene.model import MaterialSpec

    Array = NDArray[np.float64]
    IntArray = NDArray[np.int64]

# Rows and columns of a 6 by 6 law: xx, yy, zz, yz, xz, xy.
VOIGT = ((0, 0), (1, 1), (2, 2), (1, 2), (0, 2), (0, 1))
# Numbers in one batch of element matrices.
_BATCH = 4_000_000


class Cells(Protocol):
    """Solid elements, whatever their form."""

    @property
    def nodes_m(self) -> Array:
        """Places (n, 3)."""

    @property
    def elements(self) -> IntArray:
        """Nodes (e, k) of each element."""

    def quadrature(self) -> Quadrature:
        """Everything at the integration points."""

    def value(self, local: Array) -> Array:
        """Nodal functions (q, k) at local coordinates (q, 3)."""

    def locate(self, points_m: Array) -> tuple[IntArray, Array, Array]:
        """Nearest element (k,), local coordinates (k, 3) in it, and the distance left (k,)."""

    def measure(self) -> Array:
        """Volume (n,) that stands for each node, m^3."""


def stiffness_law(material: MaterialSpec) -> Array:
    """Stress of unit strain (6, 6), Pa, for (xx, yy, zz, yz, xz, xy) with engineering shears.

    Directions of the material: 1 along x, 2 along z, 3 along y.

    References
    ----------
    Jones, Mechanics of Composite Materials, eq. 2.25.
    """
    (first, second, third), (g12, g13, g23) = material.young_pa, material.shear_pa
    nu12, nu13, nu23 = material.poisson
    give = np.diag([1.0 / first, 1.0 / third, 1.0 / second, 1.0 / g23, 1.0 / g12, 1.0 / g13])
    give[0, 2] = give[2, 0] = -nu12 / first
    give[0, 1] = give[1, 0] = -nu13 / first
    give[1, 2] = give[2, 1] = -nu23 / second
    law = np.linalg.inv(give)
    return np.asarray(0.5 * (law + law.T))


def _tensor(law: Array) -> Array:
    """Law as (3, 3, 3, 3): stress a i of slope j of displacement b."""
    place = np.zeros((3, 3), dtype=np.int64)
    for number, (row, column) in enumerate(VOIGT):
        place[row, column] = place[column, row] = number
    return np.asarray(law[place[:, :, None, None], place[None, None, :, :]])


def _pattern(cells: Cells, blocks: Array) -> csr_matrix:
    elements, nodes = cells.elements.shape
    shape = (elements, nodes, nodes)
    rows = np.broadcast_to(cells.elements[:, :, None], shape).ravel()
    columns = np.broadcast_to(cells.elements[:, None, :], shape).ravel()
    size = len(cells.nodes_m)
    return coo_matrix((blocks.ravel(), (rows, columns)), shape=(size, size)).tocsr()


def _interleaved(cells: Cells, parts: dict[tuple[int, int], Array]) -> csr_matrix:
    """From blocks (e, k, k) of each pair of directions to one matrix, node-major."""
    size = 3 * len(cells.nodes_m)
    data = indices = indptr = None
    for (a, b), blocks in parts.items():
        # Equal rows and columns in equal order: every pair has the same pattern.
        one = _pattern(cells, blocks)
        if data is None:
            data, indices, indptr = np.zeros((one.nnz, 3, 3)), one.indices, one.indptr
        data[:, a, b] = one.data
    whole = bsr_matrix((data, indices, indptr), shape=(size, size)).tocsr()
    whole.eliminate_zeros()
    return csr_matrix(whole)


def stiffness(cells: Cells, at: Quadrature, law: Array) -> csr_matrix:
    """Second derivative (3 n, 3 n) of the strain energy, N/m; ``law`` (6, 6) Pa."""
    elastic = _tensor(law)
    elements, nodes = cells.elements.shape
    parts = {(a, b): np.zeros((elements, nodes, nodes)) for a in range(3) for b in range(3)}
    step = max(1, _BATCH // (9 * nodes * nodes))
    for begin in range(0, elements, step):
        chosen = slice(begin, begin + step)
        slope = at.slope[chosen].transpose(0, 3, 2, 1)
        weighted = slope * at.weight[chosen, None, None, :]
        products = np.empty((len(slope), 3, 3, nodes, nodes))
        for i in range(3):
            for j in range(i, 3):
                products[:, i, j] = weighted[:, i] @ slope[:, j].transpose(0, 2, 1)
                products[:, j, i] = products[:, i, j].transpose(0, 2, 1)
        for (a, b), whole in parts.items():
            whole[chosen] = np.tensordot(products, elastic[a, :, b, :], axes=((1, 2), (0, 1)))
    for a in range(3):
        parts[a, a] = 0.5 * (parts[a, a] + parts[a, a].transpose(0, 2, 1))
        for b in range(a):
            parts[a, b] = parts[b, a].transpose(0, 2, 1)
    return _interleaved(cells, parts)


def mass(cells: Cells, at: Quadrature, density_kg_m3: float) -> csr_matrix:
    """Second derivative (3 n, 3 n) of the kinetic energy, kg."""
    blocks = np.einsum("qa,eq,qb->eab", at.value, at.weight, at.value, optimize=True)
    blocks = 0.5 * density_kg_m3 * (blocks + blocks.transpose(0, 2, 1))
    one = _pattern(cells, blocks)
    data = one.data[:, None, None] * np.eye(3)
    size = 3 * len(cells.nodes_m)
    whole = bsr_matrix((data, one.indices, one.indptr), shape=(size, size)).tocsr()
    whole.eliminate_zeros()
    return csr_matrix(whole)
