"""Spots on bars, tubes and strings.

Named spots: ``left``, ``centre``, ``right``, on the upper side (+y). ``{fraction = [u, v]}``: u along the length;
v across the width of the upper side, 0 at -z, or on round lines once round the section from the upper side.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.body.body import SurfaceSpot
from resonate.body.ray import leave
from resonate.errors import BodyError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.line_layout import Layout
    from resonate.scene.model import BodySpec, SpotSpec

    Array = NDArray[np.float64]

# A point further off than this share of the length is a mistake, not a rounding.
_REACH = 0.05


def _half(layout: Layout, x: float) -> Array:
    section = layout.section_at(np.array([x]))
    return 0.5 * np.array([section.height[0], section.width[0]])


def _round_spot(spec: BodySpec, layout: Layout, x: float, angle: float) -> SurfaceSpot:
    outward = np.array([0.0, np.cos(angle), np.sin(angle)])
    radius = 0.5 * layout.outer_m
    point = np.array([x, 0.0, 0.0]) + radius * outward
    thickness = 0.5 * (layout.outer_m - layout.inner_m) if layout.inner_m else layout.outer_m
    return SurfaceSpot(
        point, outward, (0.0, 1.0 / radius), spec.material.young_pa[2], spec.material.poisson[0], thickness
    )


def _flat_spot(spec: BodySpec, point: Array, normal: Array, thickness: float) -> SurfaceSpot:
    axis = int(np.argmax(np.abs(normal)))
    young = spec.material.young_pa[(0, 2, 1)[axis]]
    return SurfaceSpot(point, normal, (0.0, 0.0), young, spec.material.poisson[0], thickness)


def _along(spec: BodySpec, layout: Layout, u: float, v: float) -> SurfaceSpot:
    x = u * layout.length_m
    if layout.is_round:
        return _round_spot(spec, layout, x, 2.0 * np.pi * (v - 0.5))
    half_up, half_across = _half(layout, x)
    point = np.array([x, half_up, (2.0 * v - 1.0) * half_across])
    return _flat_spot(spec, point, np.array([0.0, 1.0, 0.0]), 2.0 * half_up)


def _on_end(layout: Layout, across: Array, half: Array) -> Array:
    """Point (2,) of an end face nearest to ``across`` (2,)."""
    if not layout.is_round:
        return np.asarray(np.clip(across, -half, half))
    radius = float(np.hypot(across[0], across[1]))
    outward = across / radius if radius > 0.0 else np.array([1.0, 0.0])
    return np.asarray(np.clip(radius, 0.5 * layout.inner_m, 0.5 * layout.outer_m) * outward)


def _nearest(spec: BodySpec, layout: Layout, point: Array, *, check: bool) -> SurfaceSpot:
    x = float(np.clip(point[0], 0.0, layout.length_m))
    half_up, half_across = _half(layout, x)
    over = max(-point[0], point[0] - layout.length_m)
    if layout.is_round:
        spot = _round_spot(spec, layout, x, float(np.arctan2(point[2], point[1])))
        side = float(np.hypot(point[1], point[2])) - 0.5 * layout.outer_m
    else:
        gaps = {1: abs(point[1]) - half_up, 2: abs(point[2]) - half_across}
        axis = max(gaps, key=lambda key: gaps[key])
        clipped = np.array(
            [x, np.clip(point[1], -half_up, half_up), np.clip(point[2], -half_across, half_across)]
        )
        normal = np.zeros(3)
        normal[axis] = 1.0 if point[axis] >= 0.0 else -1.0
        clipped[axis] = normal[axis] * (half_up, half_across)[axis - 1]
        spot = _flat_spot(spec, clipped, normal, 2.0 * (half_up, half_across)[axis - 1])
        side = gaps[axis]
    if over > max(side, -1e-9 * layout.length_m) or (over >= -1e-9 * layout.length_m and side < 0.0):
        normal = np.array([1.0 if point[0] > 0.5 * layout.length_m else -1.0, 0.0, 0.0])
        end = np.array([x, *_on_end(layout, point[1:], np.array([half_up, half_across]))])
        spot = _flat_spot(spec, end, normal, layout.length_m)
    miss = float(np.linalg.norm(spot.point_m - point))
    inside = side < 0.0 and over < 0.0
    if check and not inside and miss > _REACH * layout.length_m:
        raise BodyError(
            what=f"the spot {point.tolist()} m lies {miss:g} m off the body",
            where=f"body {spec.name!r}",
            fix=f"the body runs from x = 0 to {layout.length_m:g} m, {2 * half_up:g} m high and "
            f"{2 * half_across:g} m wide there; give the point in the body's own frame",
        )
    return spot


def line_spot(spec: BodySpec, layout: Layout, spot: SpotSpec, centre_m: Array) -> SurfaceSpot:
    """Find a spot of a line; raises ``BodyError`` far off the body."""
    if spot.name is not None:
        return _along(spec, layout, {"left": 0.0, "right": 1.0}.get(spot.name, 0.5), 0.5)
    if spot.fraction is not None:
        v = spot.fraction[1] if len(spot.fraction) > 1 else 0.5
        return _along(spec, layout, spot.fraction[0], v)
    if spot.point_m is not None:
        return _nearest(spec, layout, np.array(spot.point_m), check=True)
    assert spot.toward is not None  # noqa: S101 (the scene allows exactly one way)
    toward = np.array(spot.toward) / np.linalg.norm(spot.toward)
    # March out to where the ray leaves the body.
    x_reach = np.inf
    if toward[0] != 0.0:
        x_reach = ((layout.length_m if toward[0] > 0 else 0.0) - centre_m[0]) / toward[0]
    far = min(x_reach, 2.0 * layout.length_m)

    def within(reach: Array) -> NDArray[np.bool_]:
        ray = centre_m + reach[:, None] * toward
        section = layout.section_at(np.clip(ray[:, 0], 0.0, layout.length_m))
        if layout.is_round:
            return np.asarray(np.hypot(ray[:, 1], ray[:, 2]) <= 0.5 * section.height)
        return np.asarray((np.abs(ray[:, 1]) <= 0.5 * section.height) & (np.abs(ray[:, 2]) <= 0.5 * section.width))

    return _nearest(spec, layout, centre_m + leave(within, far) * toward, check=False)
