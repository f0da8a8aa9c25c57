"""Spots on plates and membranes.

Named spots: ``centre``; ``edge``, 5 % in from the rim at +x; on rings ``outer`` and ``inner``, 5 % of the width in.
``{fraction = [u, v]}``: along x and z of the bounding box (rectangle, polygon), or share of the radius and of a
turn from +x towards +z (circle, ring). All on the upper side (+y).
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.body.body import SurfaceSpot
from resonate.body.outline import box, contains
from resonate.body.ray import leave
from resonate.errors import BodyError
from resonate.scene.model import CircleOutline, PolygonOutline, RingOutline

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.flat_layout import FlatLayout
    from resonate.scene.model import BodySpec, SpotSpec

    Array = NDArray[np.float64]

# A point further off than this share of the size is a mistake, not a rounding.
_REACH = 0.05
_IN = 0.05


def _polar(layout: FlatLayout, share: float, turn: float) -> Array:
    outline = layout.outline
    assert isinstance(outline, CircleOutline | RingOutline)  # noqa: S101 (the caller sorts the kinds)
    if isinstance(outline, RingOutline):
        radius = 0.5 * (outline.inner_m + share * (outline.outer_m - outline.inner_m))
    else:
        radius = 0.5 * share * outline.diameter_m
    angle = 2.0 * np.pi * turn
    return radius * np.array([np.cos(angle), np.sin(angle)])


def _centre(layout: FlatLayout, middle: Array) -> Array:
    if contains(layout.outline, middle[None])[0]:
        return middle
    # The centroid of an angular outline may lie outside: take the nearest point of the plate.
    nodes = layout.grid.nodes_m
    return np.asarray(nodes[int(np.argmin(np.linalg.norm(nodes - middle, axis=1)))])


def _named(layout: FlatLayout, name: str, middle: Array) -> Array:
    low, high = box(layout.outline)
    if isinstance(layout.outline, CircleOutline | RingOutline):
        share = {"centre": 0.0, "edge": 1.0 - _IN, "outer": 1.0 - _IN, "inner": _IN}[name]
        return _polar(layout, share, 0.0)
    if name == "centre":
        return _centre(layout, middle)
    centre = _centre(layout, middle)
    nodes = layout.grid.nodes_m
    level = np.abs(nodes[:, 1] - centre[1]) <= 0.25 * (high[1] - low[1])
    rim = nodes[level][int(np.argmax(nodes[level, 0]))]
    return np.asarray(rim + _IN * (centre - rim))


def _upper(spec: BodySpec, layout: FlatLayout, place: Array, side: float) -> SurfaceSpot:
    point = np.array([place[0], side * 0.5 * layout.thickness_m, place[1]])
    normal = np.array([0.0, side, 0.0])
    # A stretched skin is too thin to be pressed in: all the local give is the striker's.
    skin = layout.tension_n_m > 0.0
    return SurfaceSpot(
        point_m=point,
        normal=normal,
        curvature_1_m=(0.0, 0.0),
        young_pa=np.inf if skin else spec.material.young_pa[2],
        poisson=spec.material.poisson[0],
        thickness_m=layout.thickness_m,
        mobility_power=None if skin else 0.0,
    )


def flat_spot(spec: BodySpec, layout: FlatLayout, spot: SpotSpec, middle_m: Array) -> SurfaceSpot:
    """Find a spot of a plate or membrane; raises ``BodyError`` off the body."""
    low, high = box(layout.outline)
    side = 1.0
    if spot.name is not None:
        place = _named(layout, spot.name, middle_m)
    elif spot.fraction is not None:
        u, v = (*spot.fraction, 0.5)[:2]
        if isinstance(layout.outline, CircleOutline | RingOutline):
            place = _polar(layout, u, v if len(spot.fraction) > 1 else 0.0)
        else:
            place = low + np.array([u, v]) * (high - low)
    elif spot.point_m is not None:
        place = np.array([spot.point_m[0], spot.point_m[2]])
        side = -1.0 if spot.point_m[1] < 0.0 else 1.0
    else:
        assert spot.toward is not None  # noqa: S101 (the scene allows exactly one way)
        place, side = _ray(layout, np.array(spot.toward), middle_m)
    element, local, miss = layout.grid.locate(place[None])
    size = float((high - low).max())
    off = float(miss[0])
    if spot.point_m is not None:
        off = max(off, abs(spot.point_m[1]) - 0.5 * layout.thickness_m)
    limit = _REACH if spot.point_m is not None else 1e-6
    if off > limit * size and not (isinstance(layout.outline, PolygonOutline) and spot.name is not None):
        raise BodyError(
            what=f"the spot (x, z) = {np.round(place, 6).tolist()} m lies {off:g} m off the body",
            where=f"body {spec.name!r}",
            fix=f"the outline runs from {low.tolist()} to {high.tolist()} m in x and z; stay on it",
        )
    return _upper(spec, layout, _at(layout, element[0], local), side)


def _at(layout: FlatLayout, element: int, local: Array) -> Array:
    from resonate.body.spectral import basis

    value, _ = basis(layout.grid.order, local)
    return np.asarray(value[0] @ layout.grid.nodes_m[layout.grid.elements[element]])


def _ray(layout: FlatLayout, toward: Array, middle: Array) -> tuple[Array, float]:
    side = -1.0 if toward[1] < 0.0 else 1.0
    flat = np.array([toward[0], toward[2]])
    centre = _centre(layout, middle)
    if not flat.any():
        return centre, side
    low, high = box(layout.outline)
    reach = float(np.linalg.norm(high - low))
    limit = reach * float(np.linalg.norm(flat)) ** -1
    if toward[1] != 0.0:
        limit = min(limit, 0.5 * layout.thickness_m / abs(toward[1]))
    reach = leave(lambda steps: contains(layout.outline, centre + steps[:, None] * flat), limit)
    return centre + reach * flat, side
