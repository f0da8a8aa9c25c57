"""The meridian of a vessel: a curve in the half plane of radius and height, with corners and a wall."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np
from scipy.interpolate import CubicSpline, PchipInterpolator

from resonate.errors import BodyError

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from resonate.scene.model import VesselShape

    Array = NDArray[np.float64]

# Least cosine of the slope with which a wall meets the axis as a dome or a disc; steeper, it is a tip.
_FLAT = 0.9
# Points at which a curve is looked at.
_LOOKS = 64


@dataclass(frozen=True)
class Piece:
    """One smooth stretch; ``curve(p, d)`` gives the d-th derivative (k, 2) of (radius, height), p in [0, end]."""

    end: float
    curve: Callable[[Array, int], Array]
    wall: Callable[[Array], Array]

    def part(self, low: float, high: float) -> Piece:
        """Return the stretch between two parameters."""
        return Piece(high - low, lambda p, d: self.curve(p + low, d), lambda p: self.wall(p + low))


@dataclass(frozen=True)
class Course:
    """Points along the meridian: ``place_m`` and unit ``along``, ``outward`` (k, 2); ``wall_m`` (k,).

    ``curvature_1_m`` (k, 2) along the meridian and round the axis, positive where the outside is convex.
    """

    place_m: Array
    along: Array
    outward: Array
    wall_m: Array
    curvature_1_m: Array


def course(piece: Piece, p: Array) -> Course:
    """Look at a piece at parameters p (k,)."""
    place, first, second = (piece.curve(p, d) for d in range(3))
    speed = np.linalg.norm(first, axis=1)
    along = first / speed[:, None]
    outward = np.stack((along[:, 1], -along[:, 0]), axis=1)
    bend = (first[:, 0] * second[:, 1] - first[:, 1] * second[:, 0]) / speed**3
    radius = place[:, 0]
    near = radius < 1e-9 * max(float(radius.max()), 1e-300)
    # On the axis of a dome both curvatures are equal.
    turn = np.where(near, bend, outward[:, 0] / np.where(near, 1.0, radius))
    return Course(place, along, outward, piece.wall(p), np.stack((bend, turn), axis=1))


def _runs(points: Array) -> list[slice]:
    """Stretches between points given twice."""
    twice = np.flatnonzero(np.all(points[1:] == points[:-1], axis=1)) + 1
    edges = [0, *twice.tolist(), len(points)]
    return [slice(a, b) for a, b in pairwise(edges)]


def _spline(points: Array, walls: Array) -> Piece:
    p = np.concatenate(([0.0], np.cumsum(np.linalg.norm(np.diff(points, axis=0), axis=1))))
    ends = "natural" if len(points) < 4 else "not-a-knot"  # noqa: PLR2004 (a cubic needs four)
    # Across the axis the radius is odd and the height is even.
    closed = [points[0, 0] == 0.0, points[-1, 0] == 0.0]
    if len(points) == 2:  # noqa: PLR2004 (a straight stretch)
        closed = [False, False]
    free = (2, 0.0) if ends == "natural" else ends
    radius = CubicSpline(p, points[:, 0], bc_type=tuple((2, 0.0) if shut else free for shut in closed))
    height = CubicSpline(p, points[:, 1], bc_type=tuple((1, 0.0) if shut else free for shut in closed))
    wall = PchipInterpolator(p, walls)
    return Piece(
        float(p[-1]),
        lambda q, d: np.stack((radius(q, d), height(q, d)), axis=1),
        lambda q: np.asarray(wall(q)),
    )


def _straight(points: Array, walls: Array) -> list[Piece]:
    pieces = []
    for (a, b), (start, stop) in zip(pairwise(points), pairwise(walls), strict=True):
        length = float(np.linalg.norm(b - a))
        if length > 0.0:
            pieces.append(_segment(a, (b - a) / length, length, float(start), float(stop)))
    return pieces


def _segment(begin: Array, along: Array, length: float, start: float, stop: float) -> Piece:
    def curve(p: Array, order: int) -> Array:
        if order == 0:
            return np.asarray(begin + p[:, None] * along)
        return np.broadcast_to(along if order == 1 else 0.0 * along, (len(p), 2)).copy()

    return Piece(length, curve, lambda p: start + (stop - start) * p / length)


def _oriented(points: Array, walls: Array) -> tuple[Array, Array]:
    """Run so that the outside lies on the right: up along the wall; a flat disc has its outside below."""
    middle = 0.5 * (points[1:, 0] + points[:-1, 0])
    volume = float(middle @ np.diff(points[:, 1]))
    turned = volume < -1e-9 * float(np.ptp(points)) ** 2
    return (points[::-1].copy(), walls[::-1].copy()) if turned else (points, walls)


def meridian(shape: VesselShape, name: str) -> tuple[Piece, ...]:
    """Pieces in order, outside on their right; neighbours meet at corners.

    Raises
    ------
    BodyError
        If the curve leaves the half plane, or the wall is thicker than the radius allows.
    """
    points, walls = _oriented(np.array(shape.profile_m), np.array(shape.walls_m))
    pieces: list[Piece] = []
    for run in _runs(points):
        if shape.smooth:
            pieces.append(_spline(points[run], walls[run]))
        else:
            pieces.extend(_straight(points[run], walls[run]))
    pieces[0] = _without_tip(pieces[0], low=True)
    pieces[-1] = _without_tip(pieces[-1], low=False)
    _check(pieces, name)
    return tuple(pieces)


def _without_tip(piece: Piece, *, low: bool) -> Piece:
    """Cut a tip off where the inner faces would meet: it leaves a pinhole no wider than the wall."""
    end = np.array([0.0 if low else piece.end])
    at = course(piece, end)
    if at.place_m[0, 0] > 0.0 or abs(at.along[0, 0]) >= _FLAT:
        return piece
    share = np.linspace(0.0, 1.0, 2001)
    p = share * piece.end if low else (1.0 - share) * piece.end
    seen = course(piece, p)
    clear = seen.place_m[:, 0] >= 0.75 * seen.wall_m * np.abs(seen.outward[:, 0])
    cut = float(p[int(np.argmax(clear))])
    return piece.part(cut, piece.end) if low else piece.part(0.0, cut)


def _check(pieces: list[Piece], name: str) -> None:
    where = f"body {name!r}"
    seen = [course(piece, np.linspace(0.0, piece.end, _LOOKS)) for piece in pieces]
    place = np.concatenate([at.place_m for at in seen])
    size = float(np.linalg.norm(np.ptp(place, axis=0)))
    radius = place[:, 0].copy()
    if np.any(radius < -1e-9 * size):
        worst = place[int(np.argmin(radius))]
        raise BodyError(
            what=f"the curve through the profile crosses the axis near height {worst[1]:g} m",
            where=where,
            fix="give more points there, repeat a point to make a corner, or write smooth = false",
        )
    lean = np.concatenate([at.outward[:, 0] for at in seen])
    wall = np.concatenate([at.wall_m for at in seen])
    bend = np.concatenate([at.curvature_1_m[:, 0] for at in seen])
    tight = (radius > 1e-9 * size) & (0.5 * wall * np.abs(lean) >= radius)
    if np.any(tight):
        worst = int(np.argmax(tight))
        raise BodyError(
            what=f"a wall of {wall[worst]:g} m where the radius is only {radius[worst]:g} m "
            f"(at height {place[worst, 1]:g} m)",
            where=where,
            fix="make the wall thinner or the vessel wider there",
        )
    sharp = 0.5 * wall * np.abs(bend) >= 1.0
    if np.any(sharp):
        worst = int(np.argmax(sharp))
        raise BodyError(
            what=f"a wall of {wall[worst]:g} m bent to a radius of {1.0 / abs(bend[worst]):g} m "
            f"(at height {place[worst, 1]:g} m)",
            where=where,
            fix="make the bend wider or the wall thinner; a point given twice is a corner",
        )
    _check_crossing(place, where)


def _check_crossing(place: Array, where: str) -> None:
    a, b = place[:-1], place[1:]
    keep = np.linalg.norm(b - a, axis=1) > 0.0
    a, b = a[keep], b[keep]

    def side(p: Array, q: Array, r: Array) -> Array:
        d, e = q - p, r - p
        return np.asarray(d[..., 0] * e[..., 1] - d[..., 1] * e[..., 0])

    for k in range(len(a) - 2):
        c, d = a[k + 2 :], b[k + 2 :]
        one, two = side(a[k], b[k], c), side(a[k], b[k], d)
        three, four = side(c, d, a[k]), side(c, d, b[k])
        hit = (one * two < 0.0) & (three * four < 0.0)
        if np.any(hit):
            raise BodyError(
                what=f"the profile crosses itself near radius {a[k, 0]:g} m, height {a[k, 1]:g} m",
                where=where,
                fix="move its points apart; with smooth = true the curve may swing out between them",
            )
