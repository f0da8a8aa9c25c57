"""Quadratic tetrahedra with ten nodes, straight or curved.

Corners 0 to 3, then the middles of the edges 01, 12, 20, 03, 13, 23; local coordinates are the volume shares of
corners 1 to 3.

References
----------
Zienkiewicz & Taylor, The Finite Element Method vol. 1 (2000), section 8.8; the rule of 14 points, exact to degree 5:
Walkington, Quadrature on Simplices of Arbitrary Dimension (2000).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from itertools import permutations
from typing import TYPE_CHECKING

import numpy as np

from resonate.body.spectral import Quadrature

if TYPE_CHECKING:
    from numpy.typing import NDArray
    from scipy.spatial import cKDTree

    Array = NDArray[np.float64]
    IntArray = NDArray[np.int64]

EDGES = ((0, 1), (1, 2), (2, 0), (0, 3), (1, 3), (2, 3))
# Outward faces: corners, then the middles of their edges in the same order.
FACES = ((0, 2, 1, 6, 5, 4), (0, 1, 3, 4, 8, 7), (1, 2, 3, 5, 9, 8), (2, 0, 3, 6, 7, 9))
# Elements whose middles lie nearest to a point are tried first; so many are enough.
_TRIED = 24
_ROUNDS = 8


def quadratic(local: Array) -> tuple[Array, Array]:
    """Nodal functions (q, 10) and slopes (q, 10, 3) at local coordinates (q, 3)."""
    share = np.concatenate((1.0 - local.sum(axis=1, keepdims=True), local), axis=1)
    turn = np.concatenate((-np.ones((1, 3)), np.eye(3)))
    value, slope = np.empty((len(local), 10)), np.empty((len(local), 10, 3))
    value[:, :4] = share * (2.0 * share - 1.0)
    slope[:, :4] = (4.0 * share - 1.0)[:, :, None] * turn
    for number, (a, b) in enumerate(EDGES):
        value[:, 4 + number] = 4.0 * share[:, a] * share[:, b]
        slope[:, 4 + number] = 4.0 * (share[:, a, None] * turn[b] + share[:, b, None] * turn[a])
    return value, slope


def _rule() -> tuple[Array, Array]:
    points, weights = [], []
    # Walkington (2000): two orbits of 4 points, one of 6.
    for share, weight in ((0.31088591926330061, 0.11268792571801585), (0.092735250310891226, 0.073493043116361949)):
        for corner in range(4):
            shares = np.full(4, share)
            shares[corner] = 1.0 - 3.0 * share
            points.append(shares[1:])
            weights.append(weight)
    share, weight = 0.045503704125649649, 0.042546020777081466
    for four in sorted(set(permutations((share, share, 0.5 - share, 0.5 - share)))):
        points.append(np.array(four[1:]))
        weights.append(weight)
    return np.array(points), np.array(weights) / 6.0


@dataclass(frozen=True)
class Tetrahedra:
    """Quadratic tetrahedra (satisfies ``Cells``): ``nodes_m`` (n, 3), ``elements`` (e, 10)."""

    nodes_m: Array
    elements: IntArray

    @classmethod
    def of(cls, points_m: Array, corners: IntArray) -> Tetrahedra:
        """Straight elements from corners (e, 4) of positive volume."""
        pairs = np.sort(np.concatenate([corners[:, list(edge)] for edge in EDGES]), axis=1)
        edges, place = np.unique(pairs, axis=0, return_inverse=True)
        middles = len(points_m) + place.reshape(6, -1).T
        nodes = np.concatenate((points_m, points_m[edges].mean(axis=1)))
        return cls(nodes, np.concatenate((corners, middles), axis=1).astype(np.int64))

    def value(self, local: Array) -> Array:
        """Nodal functions (q, 10)."""
        return quadratic(local)[0]

    def quadrature(self) -> Quadrature:
        """Integrate exactly polynomials of degree 5 on straight elements."""
        points, weights = _rule()
        value, local = quadratic(points)
        corners = self.nodes_m[self.elements]
        jacobian = np.einsum("qks,ekd->eqds", local, corners, optimize=True)
        slope = np.einsum("qks,eqsd->eqkd", local, np.linalg.inv(jacobian), optimize=True)
        place = np.einsum("qk,ekd->eqd", value, corners, optimize=True)
        return Quadrature(value=value, slope=slope, weight=weights * np.linalg.det(jacobian), place_m=place)

    def least_jacobian(self) -> Array:
        """Smallest share (e,) of an element's volume that its nodes and middle see; 1 where it is straight."""
        local = np.concatenate((np.zeros((1, 3)), np.eye(3), np.full((1, 3), 0.25)))
        local = np.concatenate((local, [0.5 * (local[a] + local[b]) for a, b in EDGES]))
        corners = self.nodes_m[self.elements]
        seen = np.linalg.det(np.einsum("qks,ekd->eqds", quadratic(local)[1], corners, optimize=True))
        sides = corners[:, 1:4] - corners[:, :1]
        return np.asarray(seen.min(axis=1) / np.linalg.det(sides))

    def measure(self) -> Array:
        """Volume (n,) that stands for each node, m^3: a quarter of an element for its corners' neighbourhood each."""
        sides = self.nodes_m[self.elements[:, 1:4]] - self.nodes_m[self.elements[:, :1]]
        volume = np.linalg.det(sides) / 6.0
        total = np.zeros(len(self.nodes_m))
        # Eight equal small tetrahedra: a corner belongs to one, the middle of an edge to about four.
        np.add.at(total, self.elements[:, :4], np.broadcast_to(volume[:, None] / 32.0, (len(volume), 4)))
        np.add.at(total, self.elements[:, 4:], np.broadcast_to(volume[:, None] * 28.0 / 192.0, (len(volume), 6)))
        return total

    @cached_property
    def _tree(self) -> cKDTree:
        from scipy.spatial import cKDTree

        return cKDTree(self.nodes_m[self.elements[:, :4]].mean(axis=1))

    def locate(self, points_m: Array) -> tuple[IntArray, Array, Array]:
        """Nearest element (k,), local coordinates (k, 3) within it, and the distance left (k,), m."""
        count = min(_TRIED, len(self.elements))
        _, near = self._tree.query(points_m, k=count)
        near = np.asarray(near, dtype=np.int64).reshape(len(points_m), count)
        best, local, left = near[:, 0].copy(), np.zeros((len(points_m), 3)), np.full(len(points_m), np.inf)
        enough = 1e-12 * float(np.ptp(self.nodes_m, axis=0).max())
        for column in near.T:
            rows = np.flatnonzero(left > enough)
            if not len(rows):
                break
            guess, miss = self._invert(column[rows], points_m[rows])
            better = miss < left[rows]
            kept = rows[better]
            best[kept], local[kept], left[kept] = column[kept], guess[better], miss[better]
        return best, local, left

    def _invert(self, element: IntArray, points_m: Array) -> tuple[Array, Array]:
        corners = self.nodes_m[self.elements[element]]
        local = np.full(points_m.shape, 0.25)
        for _ in range(_ROUNDS):
            value, slope = quadratic(local)
            miss = points_m - np.einsum("pk,pkd->pd", value, corners)
            jacobian = np.einsum("pks,pkd->pds", slope, corners)
            local = _within(local + np.linalg.solve(jacobian, miss[:, :, None])[:, :, 0])
        value, _ = quadratic(local)
        return local, np.linalg.norm(np.einsum("pk,pkd->pd", value, corners) - points_m, axis=1)

    def boundary(self) -> IntArray:
        """Faces (f, 6) of one element only, outward: corners, then middles of their edges."""
        faces = np.concatenate([self.elements[:, list(face)] for face in FACES])
        _, place, times = np.unique(np.sort(faces[:, :3], axis=1), axis=0, return_inverse=True, return_counts=True)
        return np.asarray(faces[times[place.ravel()] == 1])


def _within(local: Array) -> Array:
    """Nearest shares that make a point of the element (projection on the simplex, Duchi et al., ICML 2008)."""
    share = np.concatenate((1.0 - local.sum(axis=1, keepdims=True), local), axis=1)
    falling = -np.sort(-share, axis=1)
    excess = (np.cumsum(falling, axis=1) - 1.0) / np.arange(1, 5)
    count = np.sum(falling > excess, axis=1)
    level = excess[np.arange(len(share)), count - 1]
    return np.asarray(np.maximum(share - level[:, None], 0.0)[:, 1:])
