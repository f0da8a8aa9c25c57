"""High-order nodal elements on lines, mapped quadrilaterals and mapped hexahedra.

Lagrange polynomials on Gauss-Lobatto-Legendre nodes, integrated by Gauss-Legendre points, with geometry
mapped by the same polynomials (isoparametric). Interpolation of high order resolves shear-flexible bars and
plates without locking in the thin limit.

References
----------
Patera, J. Comput. Phys. 54 (1984) 468; Karniadakis & Sherwin, Spectral/hp Element Methods (2005), ch. 2-4.
Suri, Babuska & Schwab, Math. Comp. 64 (1995) 553, on locking of high-order plate elements.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    IntArray = NDArray[np.int64]

_SPACE = 3
# Two nodes closer than this fraction of the body's size are one node.
_WELD = 1e-9
# How far a curved side may reach beyond its nodes, as a share of its element.
_BULGE = 0.02
# Points tried on each side of an element in the search for the nearest one.
_RIM = 13
# Values of nodal functions below this are round-off.
ROUNDING = 1e-13


@cache
def lobatto(order: int) -> Array:
    """Gauss-Lobatto-Legendre nodes (order + 1,) on [-1, 1], ascending."""
    legendre = np.polynomial.legendre.Legendre.basis(order).deriv()
    inner = np.sort(legendre.roots().real)
    nodes = np.concatenate(([-1.0], inner, [1.0]))
    return np.asarray(0.5 * (nodes - nodes[::-1]), dtype=np.float64)


@cache
def lobatto_weights(order: int) -> Array:
    """Weights (order + 1,) of the nodes of ``lobatto``; exact up to degree 2 order - 1.

    References
    ----------
    Abramowitz & Stegun, Handbook of Mathematical Functions, 25.4.32.
    """
    legendre = np.polynomial.legendre.Legendre.basis(order)
    return np.asarray(2.0 / (order * (order + 1) * legendre(lobatto(order)) ** 2), dtype=np.float64)


@cache
def gauss(count: int) -> tuple[Array, Array]:
    """Gauss-Legendre points and weights (count,) on [-1, 1]."""
    points, weights = np.polynomial.legendre.leggauss(count)
    return np.asarray(points, dtype=np.float64), np.asarray(weights, dtype=np.float64)


@cache
def _to_nodal(order: int) -> Array:
    nodes = lobatto(order)
    return np.asarray(np.linalg.inv(np.polynomial.legendre.legvander(nodes, order)), dtype=np.float64)


@cache
def _slope_of(degree: int) -> Array:
    """Legendre coefficients of the derivative of the Legendre polynomial of a degree."""
    return np.asarray(np.polynomial.legendre.legder([0.0] * degree + [1.0]), dtype=np.float64)


def lagrange(order: int, points: Array) -> tuple[Array, Array]:
    """Nodal polynomials and their slopes, each (points, order + 1), at ``points`` in [-1, 1]."""
    modal = np.polynomial.legendre.legvander(points, order)
    slopes = np.zeros_like(modal)
    for degree in range(1, order + 1):
        slopes[:, degree] = np.polynomial.legendre.legval(points, _slope_of(degree))
    change = _to_nodal(order)
    return modal @ change, slopes @ change


def basis(order: int, points: Array) -> tuple[Array, Array]:
    """Tensor-product nodal functions at ``points`` (q, dim).

    Returns
    -------
    value : Array
        (q, k) with k = (order + 1)**dim; the last direction runs fastest.
    slope : Array
        (q, k, dim) derivatives with respect to the element's own coordinates.
    """
    if points.shape[1] == 1:
        value, slope = lagrange(order, points[:, 0])
        return value, slope[:, :, None]
    if points.shape[1] == _SPACE:
        return _basis_in_space(order, points)
    first, first_slope = lagrange(order, points[:, 0])
    second, second_slope = lagrange(order, points[:, 1])
    shape = (len(points), -1)
    value = np.einsum("qi,qj->qij", first, second).reshape(shape)
    along = np.einsum("qi,qj->qij", first_slope, second).reshape(shape)
    across = np.einsum("qi,qj->qij", first, second_slope).reshape(shape)
    return value, np.stack((along, across), axis=2)


def _basis_in_space(order: int, points: Array) -> tuple[Array, Array]:
    value, slope = zip(*(lagrange(order, points[:, axis]) for axis in range(_SPACE)), strict=True)
    shape = (len(points), -1)
    slopes = []
    for axis in range(_SPACE):
        factors = [slope[k] if k == axis else value[k] for k in range(_SPACE)]
        slopes.append(np.einsum("qi,qj,qk->qijk", *factors, optimize=True).reshape(shape))
    return np.einsum("qi,qj,qk->qijk", *value, optimize=True).reshape(shape), np.stack(slopes, axis=2)


def tensor(line: Array, weight: Array, dimension: int) -> tuple[Array, Array]:
    """Points (n**dim, dim) and weights (n**dim,) of a rule on a line in every direction; the last runs fastest."""
    points = np.stack(np.meshgrid(*[line] * dimension, indexing="ij"), axis=-1).reshape(-1, dimension)
    weights = np.prod(np.stack(np.meshgrid(*[weight] * dimension, indexing="ij"), axis=-1), axis=-1)
    return points, weights.ravel()


@dataclass(frozen=True, slots=True)
class Quadrature:
    """Everything at the integration points of every element.

    ``value`` (q, k); ``slope`` (e, q, k, dim) in body coordinates; ``weight`` (e, q) with the Jacobian;
    ``place_m`` (e, q, dim).
    """

    value: Array
    slope: Array
    weight: Array
    place_m: Array


@dataclass(frozen=True, slots=True)
class Grid:
    """Elements of one order over a line, a flat region or a solid.

    ``nodes_m`` (n, dim) and ``elements`` (e, (order + 1)**dim), tensor order, last direction fastest.
    """

    order: int
    nodes_m: Array
    elements: IntArray

    @property
    def dimension(self) -> int:
        """1 for lines, 2 for flat regions, 3 for solids."""
        return int(self.nodes_m.shape[1])

    def value(self, local: Array) -> Array:
        """Nodal functions (q, k) at ``local`` (q, dim)."""
        return basis(self.order, local)[0]

    def quadrature(self) -> Quadrature:
        """Integrate exactly polynomials of twice the order (on unmapped elements)."""
        points, weight = tensor(*gauss(self.order + 1), self.dimension)
        value, local = basis(self.order, points)
        corners = self.nodes_m[self.elements]
        place = np.einsum("qk,ekd->eqd", value, corners)
        jacobian = np.einsum("qks,ekd->eqds", local, corners)
        scale = np.linalg.det(jacobian)
        slope = np.einsum("qks,eqsd->eqkd", local, np.linalg.inv(jacobian))
        return Quadrature(value=value, slope=slope, weight=weight * np.abs(scale), place_m=place)

    def measure(self, chosen: NDArray[np.bool_] | None = None) -> Array:
        """Length, area or volume (n,) that stands for each node, SI, in all elements or the ``chosen`` (e,) ones."""
        points, weight = tensor(lobatto(self.order), lobatto_weights(self.order), self.dimension)
        elements = self.elements if chosen is None else self.elements[chosen]
        _, slope = basis(self.order, points)
        jacobian = np.einsum("qks,ekd->eqds", slope, self.nodes_m[elements])
        total = np.zeros(len(self.nodes_m))
        np.add.at(total, elements, weight * np.abs(np.linalg.det(jacobian)))
        return total

    def locate(self, points_m: Array) -> tuple[IntArray, Array, Array]:
        """Find the element and local coordinates nearest to each point.

        Returns element (k,), local coordinates (k, dim) clipped to the element, and the distance (k,) left.
        """
        corners = self.nodes_m[self.elements]
        low, high = corners.min(axis=1), corners.max(axis=1)
        # A curved side may bulge a little beyond its nodes.
        slack = _BULGE * (high - low).max(axis=1, keepdims=True)
        outside = np.maximum(np.maximum(low - slack - points_m[:, None], points_m[:, None] - high - slack), 0.0)
        # No point of an element is nearer than its box, so that nothing further can be better.
        least = np.linalg.norm(outside, axis=2)
        near = np.linalg.norm(points_m[:, None] - corners.mean(axis=1), axis=2)
        order = np.lexsort((near, least), axis=1)
        best = np.zeros(len(points_m), dtype=np.int64)
        local = np.zeros_like(points_m)
        left = np.full(len(points_m), np.inf)
        enough = _WELD * float(np.ptp(self.nodes_m, axis=0).max())
        every = np.arange(len(points_m))
        for column in order.T:
            rows = np.flatnonzero((left > enough) & (least[every, column] < left))
            if len(rows) == 0:
                break
            element = column[rows]
            guess = self._invert(element, points_m[rows])
            miss = self._miss(element, guess, points_m[rows])
            # Points off a solid are next to it (a pressed patch on a round face): where Newton ends is good enough.
            flat = self.dimension == 2  # noqa: PLR2004 (a flat region)
            outside_it = np.flatnonzero(miss > enough) if flat else every[:0]
            if len(outside_it):
                guess[outside_it] = self._rim(element[outside_it], points_m[rows[outside_it]])
                miss[outside_it] = self._miss(element[outside_it], guess[outside_it], points_m[rows[outside_it]])
            better = miss < left[rows]
            kept = rows[better]
            best[kept], local[kept], left[kept] = element[better], guess[better], miss[better]
        return best, local, left

    def _miss(self, element: IntArray, local: Array, points_m: Array) -> Array:
        value, _ = basis(self.order, local)
        place = np.einsum("pk,pkd->pd", value, self.nodes_m[self.elements[element]])
        return np.asarray(np.linalg.norm(place - points_m, axis=1))

    def _rim(self, element: IntArray, points_m: Array) -> Array:
        """Local coordinates (k, 2) of the point nearest to each point on the four sides of its element."""
        # Every side of every element, refined apart: near a corner the nearest sample may lie on the wrong one.
        side = np.tile(np.arange(4), len(element))
        fixed, moving = side // 2, 1 - side // 2
        corners = np.repeat(self.nodes_m[self.elements[element]], 4, axis=0)
        wanted = np.repeat(points_m, 4, axis=0)
        every, share = np.arange(len(side)), np.linspace(-1.0, 1.0, _RIM)
        best = np.zeros((len(side), 2))
        best[every, fixed] = 2.0 * (side % 2) - 1.0
        reach = 1.0
        while reach > _WELD:
            tried = np.repeat(best[:, None], _RIM, axis=1)
            tried[every, :, moving] = np.clip(tried[every, :, moving] + reach * share, -1.0, 1.0)
            value, _ = basis(self.order, tried.reshape(-1, 2))
            place = np.einsum("pqk,pkd->pqd", value.reshape(*tried.shape[:2], -1), corners)
            far = np.linalg.norm(place - wanted[:, None], axis=2)
            best = tried[every, np.argmin(far, axis=1)]
            reach *= 2.0 / (_RIM - 1)
        nearest = np.argmin(far.min(axis=1).reshape(-1, 4), axis=1)
        return np.asarray(best.reshape(-1, 4, 2)[np.arange(len(element)), nearest])

    def _invert(self, element: IntArray, points_m: Array) -> Array:
        # Newton in element coordinates; kept on the square, so that a point outside ends somewhere on the rim.
        local = np.zeros_like(points_m)
        corners = self.nodes_m[self.elements[element]]
        for _ in range(12):
            value, slope = basis(self.order, local)
            miss = points_m - np.einsum("pk,pkd->pd", value, corners)
            jacobian = np.einsum("pks,pkd->pds", slope, corners)
            step = np.linalg.solve(jacobian, miss[:, :, None])[:, :, 0]
            local = np.clip(local + np.clip(step, -1.0, 1.0), -1.0, 1.0)
        return local


def line_grid(breaks_m: Array, counts: list[int], order: int) -> Grid:
    """Divide each interval between ``breaks_m`` (b,) into ``counts`` (b - 1,) equal elements."""
    ends = [np.linspace(a, b, n + 1)[:-1] for a, b, n in zip(breaks_m, breaks_m[1:], counts, strict=False)]
    edges = np.concatenate((*ends, breaks_m[-1:]))
    reference = lobatto(order)
    count = len(edges) - 1
    elements = np.arange(count)[:, None] * order + np.arange(order + 1)[None, :]
    nodes = np.zeros(count * order + 1)
    middle, half = 0.5 * (edges[1:] + edges[:-1]), 0.5 * np.diff(edges)
    nodes[elements] = middle[:, None] + half[:, None] * reference[None, :]
    nodes[elements[:, 0]], nodes[elements[:, -1]] = edges[:-1], edges[1:]
    return Grid(order=order, nodes_m=nodes[:, None], elements=elements)


def weld(places_m: Array, order: int) -> Grid:
    """Merge element nodes (e, k, dim) that coincide into one grid."""
    flat = places_m.reshape(-1, places_m.shape[2])
    size = float(np.ptp(flat, axis=0).max())
    from scipy.spatial import cKDTree

    tree = cKDTree(flat)
    pairs = tree.query_pairs(_WELD * size * 1e2, output_type="ndarray")
    owner = np.arange(len(flat))
    for low, high in pairs[np.lexsort((pairs[:, 1], pairs[:, 0]))]:
        root = min(owner[low], owner[high])
        owner[low], owner[high] = root, root
    owner = owner[owner]
    kept, numbers = np.unique(owner, return_inverse=True)
    return Grid(order=order, nodes_m=flat[kept], elements=numbers.reshape(places_m.shape[:2]).astype(np.int64))
