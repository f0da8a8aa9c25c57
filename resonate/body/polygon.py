"""Any simple polygon cut into convex quadrilaterals."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.errors import BodyError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    IntArray = NDArray[np.int64]

# Side of the triangles whose thirds have the area of a square of side 1.
_TRIANGLE = 2.5
# An element may be this share larger than asked before one more is laid.
_SLACK = 0.25
_TRIES = 8
# Side of the smallest element in a graded corner, as a share of the one that is cut. At 120 degrees the error of a
# pinned plate falls with this share.
_GRADE = 0.1
# Two points this near, as a share of the size, are one.
_CLOSE = 1e-9


def quadrilaterals(corners: Array, size_m: float) -> list[tuple[Array, int]]:
    """Quadrilaterals (4, 2) that fill a polygon, each with the number of cuts a side that ``size_m`` asks.

    Parameters
    ----------
    corners : Array
        (c, 2) in order.
    size_m : float
        Wanted side of the final elements.
    """
    if len(corners) == 3:  # noqa: PLR2004 (a triangle)
        a, b = corners[1] - corners[0], corners[2] - corners[0]
        side = float(np.sqrt(abs(a[0] * b[1] - a[1] * b[0]) / 6.0))
        count = max(2, int(np.ceil(side / size_m - _SLACK)))
        return [(quad, count) for quad in _split(corners)]
    points, triangles = triangulate(corners, _TRIANGLE * size_m)
    return [(quad, 1) for triangle in triangles for quad in _split(points[triangle])]


def grade(quads: Array, corner: Array, size_m: float) -> Array:
    """Lay a small element in the corner of every quadrilateral (e, 4, 2) that has one at ``corner`` (2,).

    The two sides that meet there are cut at the same share on every quadrilateral, so that neighbours still fit.
    """
    at = np.linalg.norm(quads - corner, axis=2) < _CLOSE * size_m
    touching = at.any(axis=1)
    turn = (np.argmax(at[touching], axis=1)[:, None] + np.arange(4)) % 4
    a, b, c, d = np.take_along_axis(quads[touching], turn[:, :, None], axis=1).transpose(1, 0, 2)
    near_b, near_d = a + _GRADE * (b - a), a + _GRADE * (d - a)
    near_c = near_b + near_d - a + _GRADE**2 * (a - b + c - d)
    pieces = [(a, near_b, near_c, near_d), (near_b, b, c, near_c), (near_d, near_c, c, d)]
    return np.concatenate([quads[~touching], *(np.stack(piece, axis=1) for piece in pieces)])


def openings(corners: Array) -> Array:
    """Interior angle (c,) at every corner of a polygon, rad."""
    ahead = np.roll(corners, -1, axis=0) - corners
    behind = np.roll(corners, 1, axis=0) - corners
    angle = np.arctan2(ahead[:, 1], ahead[:, 0]) - np.arctan2(behind[:, 1], behind[:, 0])
    swept = corners[:, 0] * np.roll(corners[:, 1], -1) - corners[:, 1] * np.roll(corners[:, 0], -1)
    return np.asarray(np.mod(-angle if swept.sum() > 0.0 else angle, 2.0 * np.pi))


def _split(triangle: Array) -> list[Array]:
    centre = triangle.mean(axis=0)
    middle = 0.5 * (triangle + np.roll(triangle, -1, axis=0))
    return [
        np.array([triangle[k], middle[k], centre, middle[k - 1]]) for k in range(3)
    ]


def triangulate(corners: Array, spacing_m: float) -> tuple[Array, IntArray]:
    """Triangles of about ``spacing_m`` that keep every edge of the polygon.

    Raises
    ------
    BodyError
        If no Delaunay triangulation of sampled edges keeps them all.
    """
    spacing = spacing_m
    for _ in range(_TRIES):
        rim = _rim(corners, spacing)
        points = np.concatenate((rim, _interior(corners, rim, spacing)))
        triangles = _inside(corners, points)
        if _keeps(triangles, len(rim)):
            return points, triangles
        spacing *= 0.7
    raise BodyError(
        what=f"a polygon of {len(corners)} corners that no mesh of the wanted size fills",
        where="an outline",
        fix="remove corners that are very close to each other or to another edge",
    )


def _rim(corners: Array, spacing: float) -> Array:
    pieces = []
    for start, stop in zip(corners, np.roll(corners, -1, axis=0), strict=True):
        count = max(1, int(np.ceil(np.linalg.norm(stop - start) / spacing - 1e-9)))
        pieces.append(start + np.arange(count)[:, None] / count * (stop - start))
    return np.concatenate(pieces)


def _distance(corners: Array, points: Array) -> Array:
    best = np.full(len(points), np.inf)
    for start, stop in zip(corners, np.roll(corners, -1, axis=0), strict=True):
        span = stop - start
        along = np.clip((points - start) @ span / (span @ span), 0.0, 1.0)
        best = np.minimum(best, np.linalg.norm(points - start - along[:, None] * span, axis=1))
    return best


def _even_odd(corners: Array, points: Array) -> NDArray[np.bool_]:
    inside = np.zeros(len(points), dtype=bool)
    for (x0, z0), (x1, z1) in zip(corners, np.roll(corners, -1, axis=0), strict=True):
        crosses = (z0 > points[:, 1]) != (z1 > points[:, 1])
        where = x0 + (points[:, 1] - z0) / (z1 - z0 if z1 != z0 else 1.0) * (x1 - x0)
        inside ^= crosses & (points[:, 0] < where)
    return inside


def _interior(corners: Array, rim: Array, spacing: float) -> Array:
    low, high = rim.min(axis=0), rim.max(axis=0)
    rows = np.arange(low[1], high[1], spacing * np.sqrt(0.75))
    lattice = [
        np.stack((np.arange(low[0] + (0.5 * spacing if k % 2 else 0.0), high[0], spacing),) * 2, axis=1)
        for k in range(len(rows))
    ]
    for k, row in enumerate(lattice):
        row[:, 1] = rows[k]
    points = np.concatenate(lattice)
    keep = _even_odd(corners, points) & (_distance(corners, points) > 0.6 * spacing)
    return points[keep]


def _inside(corners: Array, points: Array) -> IntArray:
    from scipy.spatial import Delaunay

    triangles = Delaunay(points).simplices.astype(np.int64)
    a, b, c = (points[triangles[:, k]] for k in range(3))
    doubled = (b[:, 0] - a[:, 0]) * (c[:, 1] - a[:, 1]) - (b[:, 1] - a[:, 1]) * (c[:, 0] - a[:, 0])
    size = float(np.ptp(points, axis=0).max())
    solid = np.abs(doubled) > 1e-10 * size**2
    kept: IntArray = triangles[solid & _even_odd(corners, (a + b + c) / 3.0)]
    return kept


def _keeps(triangles: IntArray, rim: int) -> bool:
    pairs = np.sort(np.concatenate([triangles[:, [0, 1]], triangles[:, [1, 2]], triangles[:, [2, 0]]]), axis=1)
    have = {(int(low), int(high)) for low, high in pairs}
    return all((min(k, (k + 1) % rim), max(k, (k + 1) % rim)) in have for k in range(rim))
