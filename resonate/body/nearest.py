"""Nearest points of a triangulated surface, how it faces there, and how it is curved."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray
    from scipy.spatial import cKDTree

    Array = NDArray[np.float64]
    IntArray = NDArray[np.int64]

# Triangles whose middles lie nearest are looked at, at the least.
_TRIED = 12
# Points used for a fitted curvature, and how far the surface may turn among them (cosine).
_FITTED = 24
_TURNED = 0.8
_UNKNOWNS = 3
# Radii beyond so many sizes of the body are flat.
_FLAT = 20.0


@dataclass(frozen=True)
class Closest:
    """``points_m`` (k, 3) on the surface, the triangle (k,) of each, and the distance (k,)."""

    points_m: Array
    triangle: IntArray
    distance_m: Array


@dataclass(frozen=True)
class Facets:
    """A triangulated surface: ``points_m`` (n, 3), ``triangles`` (t, 3) outward."""

    points_m: Array
    triangles: IntArray

    @cached_property
    def corners(self) -> Array:
        """Corners (t, 3, 3)."""
        return np.asarray(self.points_m[self.triangles])

    @cached_property
    def normals(self) -> Array:
        """Unit normals (t, 3)."""
        area = np.cross(self.corners[:, 1] - self.corners[:, 0], self.corners[:, 2] - self.corners[:, 0])
        return np.asarray(area / np.maximum(np.linalg.norm(area, axis=1, keepdims=True), 1e-300))

    @cached_property
    def _tree(self) -> cKDTree:
        from scipy.spatial import cKDTree

        return cKDTree(self.corners.mean(axis=1))

    @cached_property
    def _reach(self) -> float:
        middle = self.corners.mean(axis=1, keepdims=True)
        return float(np.linalg.norm(self.corners - middle, axis=2).max())

    def nearest(self, points_m: Array) -> Closest:
        """Project points (k, 3) on the surface."""
        found, triangle = np.empty(points_m.shape), np.empty(len(points_m), dtype=np.int64)
        first, _ = self._tree.query(points_m)
        # Nothing whose middle is further off than this can be nearer.
        near = self._tree.query_ball_point(points_m, first + self._reach)
        for row, candidates in enumerate(near):
            few = np.array(candidates, dtype=np.int64)
            places = _on_triangles(self.corners[few], points_m[row])
            best = int(np.argmin(np.linalg.norm(places - points_m[row], axis=1)))
            found[row], triangle[row] = places[best], few[best]
        return Closest(found, triangle, np.linalg.norm(found - points_m, axis=1))

    def leaving(self, way: Array) -> Array:
        """Last point (3,) of the surface on a ray from the origin along ``way`` (3,)."""
        one = self.corners[:, 0]
        first, second = self.corners[:, 1] - one, self.corners[:, 2] - one
        cross = np.cross(way, second)
        scale = np.einsum("ti,ti->t", first, cross)
        scale = np.where(np.abs(scale) < 1e-300, np.inf, scale)  # noqa: PLR2004 (edge-on)
        u = -np.einsum("ti,ti->t", one, cross) / scale
        turned = np.cross(-one, first)
        v = turned @ way / scale
        far = np.einsum("ti,ti->t", second, turned) / scale
        slack = 1e-9
        hit = (u >= -slack) & (v >= -slack) & (u + v <= 1.0 + slack) & (far > 0.0)
        if not np.any(hit):
            return np.asarray(self.nearest(way[None] * float(np.ptp(self.points_m, axis=0).max())).points_m[0])
        return np.asarray(float(far[hit].max()) * way)

    def curvatures(self, point: Array, normal: Array) -> tuple[float, float]:
        """Principal curvatures at a point, 1/m, positive where convex: a paraboloid through the corners around."""
        from scipy.spatial import cKDTree

        corner_normal = np.zeros_like(self.points_m)
        for k in range(3):
            np.add.at(corner_normal, self.triangles[:, k], self.normals)
        length = np.linalg.norm(corner_normal, axis=1)
        _, near = cKDTree(self.points_m).query(point, k=min(_FITTED, len(self.points_m)))
        near = np.asarray(near)
        alike = corner_normal[near] @ normal > _TURNED * length[near]
        off = self.points_m[near[alike]] - point
        seed = np.eye(3)[int(np.argmin(np.abs(normal)))]
        first = np.cross(normal, seed)
        first /= np.linalg.norm(first)
        second = np.cross(normal, first)
        x, y, z = off @ first, off @ second, off @ normal
        if len(x) < _UNKNOWNS + 3:
            return 0.0, 0.0
        rows = np.stack((0.5 * x * x, x * y, 0.5 * y * y, x, y, np.ones_like(x)), axis=1)
        fit = np.linalg.lstsq(rows / np.abs(rows).max(axis=0).clip(1e-300), z, rcond=1e-9)[0]
        a, b, c = (fit / np.abs(rows).max(axis=0).clip(1e-300))[:3]
        low, high = -np.linalg.eigvalsh(np.array([[a, b], [b, c]]))
        least = 1.0 / (_FLAT * float(np.ptp(self.points_m, axis=0).max()))
        one, two = (float(k) if abs(k) > least else 0.0 for k in (low, high))
        return one, two


def _on_triangles(corners: Array, point: Array) -> Array:
    """Nearest points (t, 3) of triangles (t, 3, 3) to one point (Ericson, Real-Time Collision Detection, 5.1.5)."""
    one, two, three = corners[:, 0], corners[:, 1], corners[:, 2]
    first, second, off = two - one, three - one, point - one
    aa, ab, bb = (np.einsum("ti,ti->t", p, q) for p, q in ((first, first), (first, second), (second, second)))
    pa, pb = np.einsum("ti,ti->t", off, first), np.einsum("ti,ti->t", off, second)
    scale = np.maximum(aa * bb - ab * ab, 1e-300)
    v, w = (bb * pa - ab * pb) / scale, (aa * pb - ab * pa) / scale
    inside = (v >= 0.0) & (w >= 0.0) & (v + w <= 1.0)
    best = one + v[:, None] * first + w[:, None] * second
    least = np.where(inside, np.linalg.norm(best - point, axis=1), np.inf)
    for start, stop in ((one, two), (two, three), (three, one)):
        side = stop - start
        length = np.maximum(np.einsum("ti,ti->t", side, side), 1e-300)
        share = np.clip(np.einsum("ti,ti->t", point - start, side) / length, 0.0, 1.0)
        place = start + share[:, None] * side
        miss = np.linalg.norm(place - point, axis=1)
        better = ~inside & (miss < least)
        best[better], least[better] = place[better], miss[better]
    return np.asarray(best)
