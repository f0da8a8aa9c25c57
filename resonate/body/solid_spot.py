"""Spots on blocks, balls and cylinders: exact places, normals and curvatures.

Blocks: ``top`` (+y, the default), ``bottom``, ``left`` (-x), ``right``, ``front`` (+z), ``back``: the middles of the
faces; ``corner``: on the top, 5 % in from +x and +z. ``{fraction = [u, v]}``: along x and z of the top.
Balls: the same six names; fractions: share of the way from top to bottom, and of a turn from +x towards +z.
Cylinders: ``side`` (the middle of the upper side, +y), ``left``, ``right`` (the middles of the ends, or of their
rings); fractions: along, and share of a turn from +y towards +z.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.body.body import SurfaceSpot
from resonate.errors import BodyError
from resonate.scene.model import BallShape, BlockShape, CylinderShape

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.scene.model import BodySpec, SpotSpec

    Array = NDArray[np.float64]
    Shape = BlockShape | BallShape | CylinderShape

# A point further off than this share of the size is a mistake, not a rounding.
REACH = 0.05
_IN = 0.05
SIDES = {
    "top": (1, 1.0),
    "bottom": (1, -1.0),
    "right": (0, 1.0),
    "left": (0, -1.0),
    "front": (2, 1.0),
    "back": (2, -1.0),
}


def young_along(spec: BodySpec, normal: Array) -> float:
    """Young's modulus nearest to the direction of a normal, Pa."""
    return float(spec.material.young_pa[(0, 2, 1)[int(np.argmax(np.abs(normal)))]])


def solid_spot(spec: BodySpec, spot: SpotSpec, *, spread_m: float) -> SurfaceSpot:
    """Find a spot of a block, ball or cylinder; raises ``BodyError`` off the body."""
    shape = spec.shape
    assert isinstance(shape, BlockShape | BallShape | CylinderShape)  # noqa: S101 (the caller sorts the kinds)
    if spot.point_m is not None:
        point = np.array(spot.point_m)
        place = nearest(shape, point)
        off, size = float(np.linalg.norm(place - point)), _size(shape)
        # A point inside is meant for the surface nearest to it.
        if off > REACH * size and not inside(shape, point):
            raise BodyError(
                what=f"the spot {np.round(point, 6).tolist()} m lies {off:g} m off the body",
                where=f"body {spec.name!r}",
                fix=f"give a point on the surface, in the body's own frame (origin at the centre, {size:g} m long)",
            )
    elif spot.toward is not None:
        place = _ray(shape, np.array(spot.toward))
    elif spot.fraction is not None:
        u, v = (*spot.fraction, 0.5 if isinstance(shape, BlockShape) else 0.0)[:2]
        place = _fraction(shape, u, v)
    else:
        place = _named(shape, str(spot.name))
    normal, curvature, thickness = _facing(shape, place)
    return SurfaceSpot(
        point_m=place,
        normal=normal,
        curvature_1_m=curvature,
        young_pa=young_along(spec, normal),
        poisson=spec.material.poisson[0],
        thickness_m=thickness,
        spread_m=min(spread_m, 0.4 * thickness),
    )


def _size(shape: Shape) -> float:
    if isinstance(shape, BlockShape):
        return max(shape.size_m)
    return shape.diameter_m if isinstance(shape, BallShape) else max(shape.length_m, shape.diameter_m)


def _named(shape: Shape, name: str) -> Array:
    if isinstance(shape, CylinderShape):
        radius, half = 0.5 * shape.diameter_m, 0.5 * shape.length_m
        if name == "side":
            return np.array([0.0, radius, 0.0])
        height = 0.5 * (radius + 0.5 * shape.bore_m) if shape.bore_m else 0.0
        return np.array([half if name == "right" else -half, height, 0.0])
    half_size: Array = 0.5 * (np.array(shape.size_m) if isinstance(shape, BlockShape) else np.full(3, shape.diameter_m))
    if name == "corner":
        return np.asarray(half_size * np.array([1.0 - 2.0 * _IN, 1.0, 1.0 - 2.0 * _IN]))
    axis, sign = SIDES[name]
    place = np.zeros(3)
    place[axis] = sign * half_size[axis]
    return place


def _fraction(shape: Shape, u: float, v: float) -> Array:
    if isinstance(shape, BlockShape):
        x, y, z = shape.size_m
        return np.array([(u - 0.5) * x, 0.5 * y, (v - 0.5) * z])
    radius, turn = 0.5 * shape.diameter_m, 2.0 * np.pi * v
    if isinstance(shape, BallShape):
        down = np.pi * u
        return radius * np.array([np.sin(down) * np.cos(turn), np.cos(down), np.sin(down) * np.sin(turn)])
    return np.array([(u - 0.5) * shape.length_m, radius * np.cos(turn), radius * np.sin(turn)])


def _ray(shape: Shape, toward: Array) -> Array:
    """Where a ray from the centre leaves the body (from a bore: the outside, or an end)."""
    way = toward / np.linalg.norm(toward)
    if isinstance(shape, BallShape):
        return np.asarray(0.5 * shape.diameter_m * way)
    with np.errstate(divide="ignore"):
        if isinstance(shape, BlockShape):
            return np.asarray(way * np.min(0.5 * np.array(shape.size_m) / np.abs(way)))
        across = float(np.hypot(way[1], way[2]))
        side = 0.5 * shape.diameter_m / across if across > 0.0 else np.inf
        end = 0.5 * shape.length_m / abs(way[0]) if way[0] != 0.0 else np.inf
    place = way * min(side, end)
    return nearest(shape, np.asarray(place))


def inside(shape: Shape, point: Array) -> bool:
    """Whether a point lies in the matter."""
    if isinstance(shape, BlockShape):
        return bool(np.all(np.abs(point) <= 0.5 * np.array(shape.size_m)))
    if isinstance(shape, BallShape):
        return float(np.linalg.norm(point)) <= 0.5 * shape.diameter_m
    radius = float(np.hypot(point[1], point[2]))
    hole = 0.5 * (shape.bore_m or 0.0)
    return abs(float(point[0])) <= 0.5 * shape.length_m and hole <= radius <= 0.5 * shape.diameter_m


def nearest(shape: Shape, point: Array) -> Array:
    """Nearest point (3,) of the surface."""
    if isinstance(shape, BallShape):
        length = float(np.linalg.norm(point))
        way = point / length if length > 0.0 else np.array([0.0, 1.0, 0.0])
        return np.asarray(0.5 * shape.diameter_m * way)
    if isinstance(shape, BlockShape):
        half = 0.5 * np.array(shape.size_m)
        place = np.clip(point, -half, half)
        if inside(shape, point):
            axis = int(np.argmin(half - np.abs(point)))
            place[axis] = half[axis] if point[axis] >= 0.0 else -half[axis]
        return np.asarray(place)
    half_length, outer, inner = 0.5 * shape.length_m, 0.5 * shape.diameter_m, 0.5 * (shape.bore_m or 0.0)
    radius = float(np.hypot(point[1], point[2]))
    way = point[1:] / radius if radius > 0.0 else np.array([1.0, 0.0])
    x, across = float(np.clip(point[0], -half_length, half_length)), float(np.clip(radius, inner, outer))
    if inside(shape, point):
        gaps = [outer - radius, half_length - abs(x), radius - inner if inner else np.inf]
        best = int(np.argmin(gaps))
        if best == 1:
            x = half_length if x >= 0.0 else -half_length
        else:
            across = (outer, 0.0, inner)[best]
    return np.array([x, *(across * way)])


def _facing(shape: Shape, place: Array) -> tuple[Array, tuple[float, float], float]:
    """Outward normal, principal curvatures and thickness at a point of the surface."""
    if isinstance(shape, BallShape):
        radius = 0.5 * shape.diameter_m
        return np.asarray(place / np.linalg.norm(place)), (1.0 / radius, 1.0 / radius), shape.diameter_m
    normal = np.zeros(3)
    if isinstance(shape, BlockShape):
        axis = int(np.argmin(0.5 * np.array(shape.size_m) - np.abs(place)))
        normal[axis] = np.sign(place[axis])
        return normal, (0.0, 0.0), shape.size_m[axis]
    outer, inner = 0.5 * shape.diameter_m, 0.5 * (shape.bore_m or 0.0)
    radius = float(np.hypot(place[1], place[2]))
    gaps = [abs(outer - radius), abs(0.5 * shape.length_m - abs(float(place[0]))), abs(radius - inner)]
    best = int(np.argmin(gaps if inner else gaps[:2]))
    wall = outer - inner if inner else shape.diameter_m
    if best == 1:
        normal[0] = np.sign(place[0])
        return normal, (0.0, 0.0), shape.length_m
    normal[1:] = place[1:] / radius
    if best == 0:
        return normal, (1.0 / outer, 0.0), wall
    return -normal, (-1.0 / inner, 0.0), wall
