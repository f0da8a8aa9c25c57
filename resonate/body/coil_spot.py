"""Spots on coils.

Named spots: ``left``, ``centre``, ``right``, on the outer side of the wire. ``{fraction = [u, v]}``: u along the
wire; v once round it from the inner side (0.5: the outer side).
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.body.body import SurfaceSpot
from resonate.errors import BodyError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.coil_layout import CoilLayout
    from resonate.scene.model import BodySpec, SpotSpec

    Array = NDArray[np.float64]

# A point further off than this share of the size is a mistake, not a rounding.
_REACH = 0.05
_SAMPLES = 4001


def _at(spec: BodySpec, layout: CoilLayout, arc: float, angle: float) -> SurfaceSpot:
    """Spot at an arc length, ``angle`` round the wire from its outer side towards the binormal."""
    helix = layout.helix
    frame = helix.frame(np.array([arc]))[0]
    outward = -np.cos(angle) * frame[1] + np.sin(angle) * frame[2]
    half = 0.5 * layout.wire_m
    # A torus of the same curvature: its second principal curvature changes sign on the inner side.
    bend = helix.curvature_1_m * np.cos(angle)
    along = float(bend / (1.0 + half * bend))
    material = spec.material
    point = helix.place(np.array([arc]))[0] + half * outward
    return SurfaceSpot(
        point, outward, (along, 1.0 / half), material.young_pa[2], material.poisson[0], layout.wire_m
    )


def _nearest(spec: BodySpec, layout: CoilLayout, point: Array) -> SurfaceSpot:
    helix = layout.helix
    arc = float(helix.nearest(point[None])[0])
    frame = helix.frame(np.array([arc]))[0]
    arm = point - helix.place(np.array([arc]))[0]
    angle = float(np.arctan2(arm @ frame[2], -(arm @ frame[1])))
    spot = _at(spec, layout, arc, angle)
    size = max(helix.rise_m * helix.angle, 2.0 * helix.radius_m)
    miss = float(np.linalg.norm(arm)) - 0.5 * layout.wire_m
    if miss > _REACH * size:
        raise BodyError(
            what=f"the spot {point.tolist()} m lies {miss:g} m off the body",
            where=f"body {spec.name!r}",
            fix=f"the middle of the wire runs {helix.radius_m:g} m round the axis, from x = 0 to "
            f"{helix.rise_m * helix.angle:g} m; give the point in the body's own frame",
        )
    return spot


def coil_spot(spec: BodySpec, layout: CoilLayout, spot: SpotSpec, centre_m: Array) -> SurfaceSpot:
    """Find a spot of a coil; raises ``BodyError`` far off the wire."""
    length = layout.helix.length_m
    if spot.name is not None:
        return _at(spec, layout, {"left": 0.0, "right": 1.0}.get(spot.name, 0.5) * length, 0.0)
    if spot.fraction is not None:
        v = spot.fraction[1] if len(spot.fraction) > 1 else 0.5
        return _at(spec, layout, spot.fraction[0] * length, 2.0 * np.pi * (v - 0.5))
    if spot.point_m is not None:
        return _nearest(spec, layout, np.array(spot.point_m))
    assert spot.toward is not None  # noqa: S101 (the scene allows exactly one way)
    toward = np.array(spot.toward) / np.linalg.norm(spot.toward)
    arcs = np.linspace(0.0, length, _SAMPLES)
    arms = layout.helix.place(arcs) - centre_m
    near = int(np.argmax(arms @ toward / np.linalg.norm(arms, axis=1)))
    return _nearest(spec, layout, layout.helix.place(arcs[near : near + 1])[0] + 0.5 * layout.wire_m * toward)
