"""Spots on vessels.

Named spots: ``rim``, 4 % of the meridian in from the rim, at +x; ``base``, the middle of a closed base, or 4 % in
from an open one. ``{fraction = [u, v]}``: share of the way along the meridian from base to rim, and of a turn from
+x towards +z. All on the outside; ``{point = ..}`` may lie on the inside.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.body.body import SurfaceSpot
from resonate.body.meridian import Piece, course
from resonate.errors import BodyError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.scene.model import BodySpec, MaterialSpec, SpotSpec

    Array = NDArray[np.float64]

# A point further off than this share of the size is a mistake, not a rounding.
REACH = 0.05
_IN = 0.04
_LOOKS = 513


def plate_impedance(material: MaterialSpec, thickness_m: float) -> float:
    """Driving-point impedance of an endless plate, 8 sqrt(D rho h), N s/m (Cremer, Heckl & Petersson 2005, ch. 5)."""
    young, poisson = material.young_pa, material.poisson[0]
    bending = float(np.sqrt(young[0] * young[1])) * thickness_m**3 / 12.0 / (1.0 - poisson**2)
    return float(8.0 * np.sqrt(bending * material.density_kg_m3 * thickness_m))


def share_of(pieces: tuple[Piece, ...], share: float) -> tuple[int, float]:
    """Piece and parameter at a share of the way from base to rim."""
    if rim_first(pieces):
        share = 1.0 - share
    ways = []
    for piece in pieces:
        p = np.linspace(0.0, piece.end, _LOOKS)
        step = np.linalg.norm(np.diff(piece.curve(p, 0), axis=0), axis=1)
        ways.append(np.concatenate(([0.0], np.cumsum(step))))
    wanted = share * sum(float(way[-1]) for way in ways)
    for number, (piece, way) in enumerate(zip(pieces, ways, strict=True)):
        if wanted <= way[-1] or number == len(pieces) - 1:
            return number, float(np.interp(wanted, way, np.linspace(0.0, piece.end, _LOOKS)))
        wanted -= float(way[-1])
    raise AssertionError


def rim_first(pieces: tuple[Piece, ...]) -> bool:
    """Whether the rim is where the pieces begin: the open end, or the upper one if both are alike."""
    ends = np.stack((pieces[0].curve(np.zeros(1), 0)[0], pieces[-1].curve(np.array([pieces[-1].end]), 0)[0]))
    shut = ends[:, 0] <= 1e-9 * max(float(np.abs(ends).max()), 1e-300)
    if shut[0] != shut[1]:
        return bool(shut[1])
    if ends[0, 1] == ends[1, 1]:
        return bool(ends[0, 0] > ends[1, 0])
    return bool(ends[0, 1] > ends[1, 1])


def foot_of(pieces: tuple[Piece, ...], point: Array) -> tuple[int, float]:
    """Piece and parameter of the place nearest to a point (radius, height)."""
    best = (np.inf, 0, 0.0)
    for number, piece in enumerate(pieces):
        p = np.linspace(0.0, piece.end, _LOOKS)
        for _ in range(4):
            miss = np.linalg.norm(piece.curve(p, 0) - point, axis=1)
            least = int(np.argmin(miss))
            if float(miss[least]) < best[0]:
                best = (float(miss[least]), number, float(p[least]))
            p = np.linspace(p[max(least - 1, 0)], p[min(least + 1, len(p) - 1)], _LOOKS)
    return best[1], best[2]


def _spot(spec: BodySpec, pieces: tuple[Piece, ...], foot: tuple[int, float], turn: float, side: float) -> SurfaceSpot:
    at = course(pieces[foot[0]], np.array([foot[1]]))
    half = 0.5 * side * float(at.wall_m[0])
    radius, height = at.place_m[0] + half * at.outward[0]
    out = side * at.outward[0]
    bends = side * at.curvature_1_m[0] / (1.0 + half * at.curvature_1_m[0])
    return SurfaceSpot(
        point_m=np.array([radius * np.cos(turn), height, radius * np.sin(turn)]),
        normal=np.array([out[0] * np.cos(turn), out[1], out[0] * np.sin(turn)]),
        curvature_1_m=(float(bends[0]), float(bends[1])),
        young_pa=spec.material.young_pa[2],
        poisson=spec.material.poisson[0],
        thickness_m=float(at.wall_m[0]),
        # Short waves see a flat plate.
        mobility_power=0.0,
        wave_mobility_s_kg=1.0 / plate_impedance(spec.material, float(at.wall_m[0])),
    )


def vessel_spot(spec: BodySpec, pieces: tuple[Piece, ...], spot: SpotSpec, centre_m: Array) -> SurfaceSpot:
    """Find a spot of a vessel; raises ``BodyError`` far off the body."""
    if spot.name is not None:
        shut = pieces[-1 if rim_first(pieces) else 0].curve(
            np.array([pieces[-1].end if rim_first(pieces) else 0.0]), 0
        )[0, 0]
        share = 1.0 - _IN if spot.name == "rim" else (_IN if shut > 0.0 else 0.0)
        return _spot(spec, pieces, share_of(pieces, share), 0.0, 1.0)
    if spot.fraction is not None:
        return _spot(spec, pieces, share_of(pieces, spot.fraction[0]), 2.0 * np.pi * spot.fraction[1], 1.0)
    if spot.point_m is not None:
        return _nearest(spec, pieces, np.array(spot.point_m))
    assert spot.toward is not None  # noqa: S101 (the scene allows exactly one way)
    return _ray(spec, pieces, np.array(spot.toward), centre_m)


def _nearest(spec: BodySpec, pieces: tuple[Piece, ...], point: Array) -> SurfaceSpot:
    flat = np.array([np.hypot(point[0], point[2]), point[1]])
    foot = foot_of(pieces, flat)
    at = course(pieces[foot[0]], np.array([foot[1]]))
    away = float((flat - at.place_m[0]) @ at.outward[0])
    miss = float(np.linalg.norm(flat - at.place_m[0])) - 0.5 * float(at.wall_m[0])
    check_reach(spec, pieces, point, miss)
    turn = float(np.arctan2(point[2], point[0]))
    return _spot(spec, pieces, foot, turn, -1.0 if away < 0.0 else 1.0)


def check_reach(spec: BodySpec, pieces: tuple[Piece, ...], point: Array, miss_m: float) -> None:
    """Refuse a point that lies far off the wall."""
    place = np.concatenate([piece.curve(np.linspace(0.0, piece.end, _LOOKS), 0) for piece in pieces])
    size = float(max(2.0 * place[:, 0].max(), np.ptp(place[:, 1])))
    if miss_m > REACH * size:
        raise BodyError(
            what=f"the point {point.tolist()} m lies {miss_m:g} m off the wall",
            where=f"body {spec.name!r}",
            fix=f"the wall reaches {place[:, 0].max():g} m from the axis and from {place[:, 1].min():g} to "
            f"{place[:, 1].max():g} m along y; give a point on it, in the body's own frame",
        )


def _ray(spec: BodySpec, pieces: tuple[Piece, ...], toward: Array, centre_m: Array) -> SurfaceSpot:
    toward = toward / np.linalg.norm(toward)
    place = np.concatenate([piece.curve(np.linspace(0.0, piece.end, 129), 0) for piece in pieces])
    size = float(np.abs(place).max() + np.abs(centre_m).max())
    ray = centre_m + np.linspace(0.0, 3.0 * size, 3001)[:, None] * toward
    flat = np.stack((np.hypot(ray[:, 0], ray[:, 2]), ray[:, 1]), axis=1)
    miss = np.linalg.norm(flat[:, None] - place[None], axis=2)
    near = miss.min(axis=1)
    # The last pass through the wall; where the ray leaves by an opening, the nearest place of the wall.
    steps = np.flatnonzero((near[1:-1] <= near[:-2]) & (near[1:-1] < near[2:])) + 1
    within = steps[near[steps] < 0.02 * size]
    last = int(within[-1]) if len(within) else int(np.argmin(near))
    foot = foot_of(pieces, flat[last])
    at = course(pieces[foot[0]], np.array([foot[1]]))
    turn = float(np.arctan2(ray[last, 2], ray[last, 0]))
    out = np.array([at.outward[0, 0] * np.cos(turn), at.outward[0, 1], at.outward[0, 0] * np.sin(turn)])
    return _spot(spec, pieces, foot, turn, 1.0 if float(out @ toward) >= 0.0 else -1.0)
