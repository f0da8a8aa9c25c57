"""Flat regions cut into mapped quadrilaterals, and their edges.

Rectangles and four-cornered convex polygons are mapped directly; a circle is a square core with four curved
blocks round it; a ring is a polar grid; a triangle is three quadrilaterals; any other polygon is triangulated and
each triangle cut in three.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from resonate.body.polygon import grade, quadrilaterals
from resonate.body.spectral import Grid, lagrange, lobatto, lobatto_weights, weld
from resonate.errors import BodyError
from resonate.scene.model import CircleOutline, PolygonOutline, RectangleOutline, RingOutline

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from resonate.scene.model import Outline

    Array = NDArray[np.float64]
    Map = Callable[[Array, Array], Array]

# Half side of the square core of a circle as a share of the radius, and how far its sides bulge.
_CORE = 0.5
_BULGE = 0.12
# Least sine of the turn at a corner of a mapped quadrilateral.
_BENT = 0.05
# An element may be this share larger than asked before one more is laid.
_SLACK = 0.25
# Opposite sides that differ by more than this are not joined by one map: it would crowd elements at the short one.
_TAPER = 2.0
# From so many elements along, one across is enough if it spans the waves.
_STRIP = 8


@dataclass(frozen=True, slots=True)
class Edge:
    """One named edge: nodes (k,) of the grid, their outward normals (k, 2) and length (k,) that each stands for, m."""

    nodes: NDArray[np.int64]
    outward: Array
    length_m: Array


def area(outline: Outline) -> float:
    """Area of the region, m^2."""
    if isinstance(outline, RectangleOutline):
        return outline.a_m * outline.b_m
    if isinstance(outline, CircleOutline):
        return float(np.pi / 4.0 * outline.diameter_m**2)
    if isinstance(outline, RingOutline):
        return float(np.pi / 4.0 * (outline.outer_m**2 - outline.inner_m**2))
    x, z = np.array(outline.corners_m).T
    return abs(float(0.5 * np.sum(x * np.roll(z, -1) - z * np.roll(x, -1))))


def box(outline: Outline) -> tuple[Array, Array]:
    """Lower and upper corner (2,) of the bounding box, m."""
    if isinstance(outline, RectangleOutline):
        half = 0.5 * np.array([outline.a_m, outline.b_m])
    elif isinstance(outline, CircleOutline):
        half = np.full(2, 0.5 * outline.diameter_m)
    elif isinstance(outline, RingOutline):
        half = np.full(2, 0.5 * outline.outer_m)
    else:
        corners = np.array(outline.corners_m)
        return corners.min(axis=0), corners.max(axis=0)
    return -half, half


def contains(outline: Outline, points_m: Array) -> NDArray[np.bool_]:
    """Whether points (k, 2) lie in the region (k,)."""
    x, z = points_m[:, 0], points_m[:, 1]
    if isinstance(outline, RectangleOutline):
        return (np.abs(x) <= 0.5 * outline.a_m) & (np.abs(z) <= 0.5 * outline.b_m)
    if isinstance(outline, CircleOutline):
        return np.hypot(x, z) <= 0.5 * outline.diameter_m
    if isinstance(outline, RingOutline):
        radius = np.hypot(x, z)
        return (radius <= 0.5 * outline.outer_m) & (radius >= 0.5 * outline.inner_m)
    inside = np.zeros(len(points_m), dtype=bool)
    corners = np.array(outline.corners_m)
    for (x0, z0), (x1, z1) in zip(corners, np.roll(corners, -1, axis=0), strict=True):
        crosses = (z0 > z) != (z1 > z)
        where = x0 + (z - z0) / np.where(z1 == z0, 1.0, z1 - z0) * (x1 - x0)
        inside ^= crosses & (x < where)
    return inside


def _patch(mapping: Map, first: int, second: int, order: int) -> Array:
    # Elements (first * second, (order + 1)**2, 2) of a map from the unit square.
    node = 0.5 * (lobatto(order) + 1.0)
    u = (np.arange(first)[:, None] + node).ravel() / first
    v = (np.arange(second)[:, None] + node).ravel() / second
    grid_u, grid_v = np.meshgrid(u, v, indexing="ij")
    places = mapping(grid_u, grid_v)
    n = order + 1
    blocks = places.reshape(first, n, second, n, 2).transpose(0, 2, 1, 3, 4)
    return blocks.reshape(first * second, n * n, 2)


def _bilinear(corners: Array) -> Map:
    a, b, c, d = corners

    def mapping(u: Array, v: Array) -> Array:
        u, v = u[..., None], v[..., None]
        return np.asarray((1 - u) * (1 - v) * a + u * (1 - v) * b + u * v * c + (1 - u) * v * d)

    return mapping


def _circle(radius: float, first: int, second: int, order: int) -> Array:
    core = _CORE * radius

    def side(t: Array) -> tuple[Array, Array]:
        # Right side of the core, from the lower to the upper corner, bulged outward.
        along = 2.0 * t - 1.0
        return core * (1.0 + _BULGE * (1.0 - along**2)), core * along

    def middle(u: Array, v: Array) -> Array:
        # Coons blend of the four bulged sides.
        across_u, across_v = 2.0 * u - 1.0, 2.0 * v - 1.0
        x = core * across_u * (1.0 + _BULGE * (1.0 - across_v**2))
        z = core * across_v * (1.0 + _BULGE * (1.0 - across_u**2))
        return np.stack((x, z), axis=-1)

    blocks = [_patch(middle, first, first, order)]
    for quarter in range(4):
        turn = 0.5 * np.pi * quarter
        cosine, sine = float(np.round(np.cos(turn))), float(np.round(np.sin(turn)))

        def outer(u: Array, v: Array, cosine: float = cosine, sine: float = sine) -> Array:
            x0, z0 = side(v)
            angle = 0.25 * np.pi * (2.0 * v - 1.0)
            x = (1 - u) * x0 + u * radius * np.cos(angle)
            z = (1 - u) * z0 + u * radius * np.sin(angle)
            return np.stack((cosine * x - sine * z, sine * x + cosine * z), axis=-1)

        blocks.append(_patch(outer, second, first, order))
    return np.concatenate(blocks)


def _ring(outer: float, inner: float, radial: int, round_about: int, order: int) -> Array:
    def mapping(u: Array, v: Array) -> Array:
        radius = inner + u * (outer - inner)
        angle = 2.0 * np.pi * v
        return np.stack((radius * np.cos(angle), radius * np.sin(angle)), axis=-1)

    return _patch(mapping, radial, round_about, order)


def _mapped(corners: Array, size_m: float, order: int) -> Array:
    if len(corners) == 4 and _convex(corners):  # noqa: PLR2004 (four corners)
        sides = np.linalg.norm(np.roll(corners, -1, axis=0) - corners, axis=1)
        if max(sides[0] / sides[2], sides[2] / sides[0], sides[1] / sides[3], sides[3] / sides[1]) < _TAPER:
            first, second = _counts(max(sides[0], sides[2]) / size_m, max(sides[1], sides[3]) / size_m)
            return _patch(_bilinear(corners), first, second, order)
    pieces = quadrilaterals(corners, size_m)
    return np.concatenate([_patch(_bilinear(quad), count, count, order) for quad, count in pieces])


def _polygon(corners: Array, size_m: float, order: int, graded: tuple[int, ...]) -> Array:
    elements = _mapped(corners, size_m, order)
    if not graded:
        return elements
    # Every element is the bilinear map of its own corners.
    n = order + 1
    quads = elements[:, [0, n * order, n * n - 1, order]]
    for number in graded:
        quads = grade(quads, corners[number], float(np.ptp(corners, axis=0).max()))
    return np.concatenate([_patch(_bilinear(quad), 1, 1, order) for quad in quads])


def _counts(along: float, across: float) -> tuple[int, int]:
    """Elements along two sides: two at least, one across a strip."""
    first, second = (max(1, int(np.ceil(ratio - _SLACK))) for ratio in (along, across))
    strip = max(first, second) >= _STRIP
    return (first, second) if strip else (max(2, first), max(2, second))


def _convex(corners: Array) -> bool:
    ahead = np.roll(corners, -1, axis=0) - corners
    turn = ahead[:, 0] * np.roll(ahead[:, 1], -1) - ahead[:, 1] * np.roll(ahead[:, 0], -1)
    # A corner opened nearly straight would fold the map.
    lengths = np.linalg.norm(ahead, axis=1)
    sine = turn / (lengths * np.roll(lengths, -1))
    return bool(np.all(sine > _BENT) or np.all(sine < -_BENT))


def cut(outline: Outline, *, size_m: tuple[float, float], order: int, graded: tuple[int, ...] = ()) -> Grid:
    """Cut a region into elements of about ``size_m`` along x and z, with small ones in ``graded`` corners of a polygon.

    Raises
    ------
    BodyError
        If a polygon cannot be divided.
    """
    low, high = box(outline)
    if isinstance(outline, RectangleOutline):
        first, second = _counts(outline.a_m / size_m[0], outline.b_m / size_m[1])
        corners = np.array([low, [high[0], low[1]], high, [low[0], high[1]]])
        return weld(_patch(_bilinear(corners), first, second, order), order)
    size = min(size_m)
    if isinstance(outline, CircleOutline):
        radius = 0.5 * outline.diameter_m
        first = max(1, int(np.ceil(2.0 * _CORE * (1.0 + _BULGE) * radius / size - _SLACK)))
        second = max(1, int(np.ceil((1.0 - _CORE) * radius / size - _SLACK)))
        return weld(_circle(radius, first, second, order), order)
    if isinstance(outline, RingOutline):
        outer, inner = 0.5 * outline.outer_m, 0.5 * outline.inner_m
        radial = max(1, int(np.ceil((outer - inner) / size - _SLACK)))
        about = max(8, int(np.ceil(np.pi * (outer + inner) / size)))
        return weld(_ring(outer, inner, radial, about, order), order)
    grid = weld(_polygon(np.array(outline.corners_m), size, order, graded), order)
    if abs(float(grid.quadrature().weight.sum()) - area(outline)) > 1e-6 * area(outline):
        raise BodyError(
            what="the polygon could not be divided into elements that fill it",
            where="an outline",
            fix="remove very sharp or very close corners",
        )
    return grid


def edges(outline: Outline, grid: Grid) -> dict[str, Edge]:
    """Every named edge of a region."""
    low, high = box(outline)
    nodes, size = grid.nodes_m, float((high - low).max())
    found: dict[str, Edge] = {}
    if isinstance(outline, RectangleOutline):
        for axis, letter in enumerate("xz"):
            for sign, name, end in ((-1.0, "-", low), (1.0, "+", high)):
                at = np.flatnonzero(np.abs(nodes[:, axis] - end[axis]) < 1e-7 * size)
                outward = np.zeros((len(at), 2))
                outward[:, axis] = sign
                found[letter + name] = Edge(at, outward, _lengths(grid, at))
    elif isinstance(outline, PolygonOutline):
        corners = np.array(outline.corners_m)
        swept = corners[:, 0] * np.roll(corners[:, 1], -1) - corners[:, 1] * np.roll(corners[:, 0], -1)
        hand = 1.0 if float(swept.sum()) > 0.0 else -1.0
        for number, (start, stop) in enumerate(zip(corners, np.roll(corners, -1, axis=0), strict=True), 1):
            length = float(np.linalg.norm(stop - start))
            along = (stop - start) / length
            offset = nodes - start
            far = np.abs(offset[:, 0] * along[1] - offset[:, 1] * along[0])
            run = offset @ along
            at = np.flatnonzero((far < 1e-7 * size) & (run > -1e-7 * size) & (run < length + 1e-7 * size))
            outward = np.tile(hand * np.array([along[1], -along[0]]), (len(at), 1))
            found[f"edge{number}"] = Edge(at, outward, _lengths(grid, at))
    else:
        rims = {"outer": high[0]}
        if isinstance(outline, RingOutline):
            rims["inner"] = 0.5 * outline.inner_m
        radius = np.hypot(nodes[:, 0], nodes[:, 1])
        for name, rim in rims.items():
            at = np.flatnonzero(np.abs(radius - rim) < 1e-7 * size)
            sign = -1.0 if name == "inner" else 1.0
            found[name] = Edge(at, sign * nodes[at] / rim, _lengths(grid, at))
    return found


def _lengths(grid: Grid, at: NDArray[np.int64]) -> Array:
    # Gauss-Lobatto weights of the elements' sides along an edge: a spread spring is then the same on every mesh.
    on_edge = np.zeros(len(grid.nodes_m), dtype=bool)
    on_edge[at] = True
    n = grid.order + 1
    number = np.arange(n * n).reshape(n, n)
    weight, length = lobatto_weights(grid.order), np.zeros(len(grid.nodes_m))
    _, slope = lagrange(grid.order, lobatto(grid.order))
    for side in (number[0], number[-1], number[:, 0], number[:, -1]):
        sides = grid.elements[:, side]
        sides = sides[on_edge[sides].all(axis=1)]
        speed = np.linalg.norm(np.einsum("qk,ekd->eqd", slope, grid.nodes_m[sides]), axis=2)
        np.add.at(length, sides, weight * speed)
    return np.asarray(length[at])
