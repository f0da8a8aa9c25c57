"""The corners of a polygon: read, and checked for outlines that enclose nothing or cross themselves."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Final

from resonate.scene.kinds import number
from resonate.scene.refused import RefusedError, shown

if TYPE_CHECKING:
    from collections.abc import Callable

Corners = tuple[tuple[float, float], ...]

# Elements in a thinner corner are so long that rounding drowns their modes: found by trial, with room to spare.
_SHARPEST_DEG: Final = 0.5
_read_corner = number("length")


def corners(value: object) -> Corners:
    """Read ``[[x, z], ...]``; raises ``RefusedError``."""
    if not isinstance(value, list | tuple) or len(value) < 3:  # noqa: PLR2004 (a triangle)
        raise RefusedError(
            f"{shown(value)} has fewer than 3 corners", "give at least 3 corners [[x, z], ...]"
        )
    read: list[tuple[float, float]] = []
    for place, corner in enumerate(value):
        if not isinstance(corner, list | tuple) or len(corner) != 2:  # noqa: PLR2004 (x and z)
            raise RefusedError(f"{shown(corner)} is not a corner", "give [x, z]", at=(place,))
        read.append((at_place(_read_corner, corner[0], (place, 0)), at_place(_read_corner, corner[1], (place, 1))))
    _check_polygon(read)
    return tuple(read)


def at_place(read: Callable[[object], float], value: object, at: tuple[int, ...]) -> float:
    """Read one value of a list; a refusal names its place."""
    try:
        return read(value)
    except RefusedError as error:
        raise RefusedError(error.what, error.fix, at=at) from error


def _check_polygon(corners: list[tuple[float, float]]) -> None:
    count = len(corners)
    for k in range(count):
        if corners[k] == corners[(k + 1) % count]:
            raise RefusedError(
                f"corners {k + 1} and {(k + 1) % count + 1} are the same point",
                "leave one out; the outline closes by itself",
                at=((k + 1) % count,),
            )
    size = max(max(axis) - min(axis) for axis in zip(*corners, strict=True))
    far = max(corners, key=lambda corner: math.dist(corner, corners[0]))
    if all(abs(_side(corners[0], far, corner)) < 1e-9 * size * size for corner in corners):
        raise RefusedError("the polygon has no area", "give corners that do not lie on one line")
    for k, corner in enumerate(corners):
        angle = _opening(corners[k - 1], corner, corners[(k + 1) % count])
        if 0.0 < angle < _SHARPEST_DEG:
            raise RefusedError(
                f"corner {k + 1} opens by {angle:.2g} deg, too thin for a mesh",
                f"open it to at least {_SHARPEST_DEG:g} deg, or cut its tip off with one corner more",
                at=(k,),
            )
    for k in range(count):
        for j in range(k + 1, count):
            adjacent = j == k + 1 or (k == 0 and j == count - 1)
            ends = (corners[k], corners[(k + 1) % count], corners[j], corners[(j + 1) % count])
            if _overlap(*ends) if adjacent else _cross(*ends):
                raise RefusedError(
                    f"edges {k + 1} and {j + 1} of the polygon cross",
                    "list the corners in order round the outline",
                )


Point = tuple[float, float]


def _side(a: Point, b: Point, c: Point) -> float:
    return (b[0] - a[0]) * (c[1] - a[1]) - (b[1] - a[1]) * (c[0] - a[0])


def _opening(before: Point, corner: Point, after: Point) -> float:
    """Angle between the two sides of a corner, deg; 0 where one folds back on the other."""
    one, two = ((end[0] - corner[0], end[1] - corner[1]) for end in (before, after))
    cross, dot = one[0] * two[1] - one[1] * two[0], one[0] * two[0] + one[1] * two[1]
    return math.degrees(math.atan2(abs(cross), dot))


def _within(a: Point, b: Point, c: Point) -> bool:
    return min(a[0], b[0]) <= c[0] <= max(a[0], b[0]) and min(a[1], b[1]) <= c[1] <= max(a[1], b[1])


def _cross(a: Point, b: Point, c: Point, d: Point) -> bool:
    one, two, three, four = _side(a, b, c), _side(a, b, d), _side(c, d, a), _side(c, d, b)
    if one * two < 0 and three * four < 0:
        return True
    touching = ((one, a, b, c), (two, a, b, d), (three, c, d, a), (four, c, d, b))
    return any(side == 0 and _within(start, stop, point) for side, start, stop, point in touching)


def _overlap(a: Point, b: Point, c: Point, d: Point) -> bool:
    # Neighbours share a corner; they overlap only when they fold back on each other.
    shared, one, two = (b, a, d) if b == c else (a, b, c)
    if _side(one, shared, two) != 0:
        return False
    dot = (one[0] - shared[0]) * (two[0] - shared[0]) + (one[1] - shared[1]) * (two[1] - shared[1])
    return dot > 0
