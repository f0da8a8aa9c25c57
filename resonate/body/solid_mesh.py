"""Solids from a file: tetrahedra, surface and spots.

Spots: ``top`` (+y, the default), ``bottom``, ``left`` (-x), ``right``, ``front`` (+z), ``back``: where a ray from the
mass centre leaves the body. ``{fraction = [u, v]}``: the direction of such a ray, u from top to bottom, v round from +x
towards +z.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy.sparse import coo_matrix
from scipy.sparse.csgraph import connected_components

from resonate.body.body import Surface, SurfaceSpot
from resonate.body.display import join
from resonate.body.mesher import fill
from resonate.body.nearest import Facets
from resonate.body.solid_layout import SolidLayout, highest_hz, wavenumbers
from resonate.body.solid_skin import Skin, gathered
from resonate.body.solid_spot import REACH, SIDES, young_along
from resonate.body.tetra import Tetrahedra
from resonate.errors import BodyError
from resonate.scene.model import SolidShape

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.scene.model import BodySpec, SpotSpec

    Array = NDArray[np.float64]
    IntArray = NDArray[np.int64]

# Elements for each of the shortest waves (two nodal distances each), and over the whole body at the least.
_PER_WAVE = 6.0
_LEAST = 8.0
# Elements through the thinnest extent of a lump; a wall has one at the least.
_THROUGH = 4.0
# Largest number of nodes, aimed at.
BUDGET = 8000
# Above the budget by this factor, a mesh is made again, so many times at the most.
_OVER, _AGAIN = 1.4, 3
# By this share the volume of curved elements may miss that of the surface.
_VOLUME = 0.02
# Nodes in a volume of so many cubes of the element's size.
_NODES_PER_CUBE = 7.0
# What fills less of its box than this is a wall rather than a lump.
_LUMP = 0.4
# A middle node moves to a curved surface only where no element loses more than this of its volume there.
_BEND = 0.3
# Faces that meet at a smaller angle than this (cosine) look like one smooth surface.
_SMOOTH = 0.85
# More triangles than this are not shown; the faces of the elements are.
_SHOWN = 12_000
_SHEETS = 200


def facets_of(spec: BodySpec) -> Facets:
    """Surface of a solid from a file."""
    shape = spec.shape
    if not isinstance(shape, SolidShape) or shape.surface is None:
        raise BodyError(
            what="a solid whose surface was not read",
            where=f"body {spec.name!r}",
            fix="read the scene from its file: the surface is looked for beside it",
        )
    return Facets(shape.surface.points_m, shape.surface.triangles)


def lay_mesh(spec: BodySpec) -> SolidLayout:
    """Fill a surface with elements sized by the highest wanted frequency, within a budget.

    Raises
    ------
    BodyError
        If no mesher can fill it.
    """
    facets = facets_of(spec)
    assert isinstance(spec.shape, SolidShape)  # noqa: S101 (facets_of has checked)
    assert spec.shape.surface is not None  # noqa: S101 (the same)
    corners = facets.corners
    volume = float(np.einsum("ti,ti->", corners[:, 0], np.cross(corners[:, 1], corners[:, 2])) / 6.0)
    area = float(np.linalg.norm(np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0]), axis=1).sum())
    size = np.ptp(facets.points_m, axis=0)
    lump = volume > _LUMP * float(np.prod(size))
    # The area counts both sides of a wall.
    wall = float(size.min()) if lump else 4.0 * volume / area
    top = highest_hz(spec, size if lump else np.full(3, wall), volume)
    wave = float(wavenumbers(spec.material, np.full(3, wall), top).max())
    wanted = min(2.0 * np.pi / (_PER_WAVE * wave), float(size.max()) / _LEAST, wall / (_THROUGH if lump else 1.0))
    least = float((_NODES_PER_CUBE * volume / BUDGET) ** (1.0 / 3.0))
    step = max(wanted, least)
    cells = fill(facets.points_m, facets.triangles, size_m=step, volume_m3=volume, name=spec.name)
    for _ in range(_AGAIN):
        # Fine surfaces make for fine elements.
        if len(cells.nodes_m) <= _OVER * BUDGET:
            break
        step *= float(max(1.1, (len(cells.nodes_m) / BUDGET) ** (1.0 / 3.0)))
        cells = fill(facets.points_m, facets.triangles, size_m=step, volume_m3=volume, name=spec.name)
    cells = _curved(cells, facets)
    missed = _missed(cells, volume)
    for _ in range(_AGAIN):
        # Chords of curved edges cut something off, the less the shorter they are.
        if abs(missed) <= 0.25 * _VOLUME or len(cells.nodes_m) > BUDGET:
            break
        step *= 0.7
        cells = _curved(
            fill(facets.points_m, facets.triangles, size_m=step, volume_m3=volume, name=spec.name), facets
        )
        missed = _missed(cells, volume)
    if abs(missed) > _VOLUME:
        raise BodyError(
            what=f"elements of {1e3 * step:.2g} mm miss the volume of its surface by {missed:.1%}",
            where=f"body {spec.name!r}",
            fix="simplify the surface: thin fins and slots are lost between such elements",
        )
    notes = [f"body {spec.name!r}: {note}" for note in spec.shape.surface.notes]
    if step > wanted * (1.0 + 1e-9):
        reach = top * wanted / step
        notes.append(
            f"body {spec.name!r}: elements of {1e3 * step:.2g} mm ({len(cells.nodes_m)} nodes) instead of the "
            f"{1e3 * wanted:.2g} mm that {top:.0f} Hz asks for; modes are resolved up to about {reach:.0f} Hz"
        )
    # Nodes lie half an element apart.
    mesh = (2, len(cells.elements), len(cells.nodes_m))
    each = float((volume / len(cells.elements)) ** (1.0 / 3.0))
    return SolidLayout(cells, _skin(cells, facets), size, 1.5 * each, mesh, tuple(notes))


def _missed(cells: Tetrahedra, volume_m3: float) -> float:
    return float(cells.quadrature().weight.sum()) / volume_m3 - 1.0


def _curved(cells: Tetrahedra, facets: Facets) -> Tetrahedra:
    """Move the middle nodes of the boundary onto the surface that was given."""
    faces = cells.boundary()
    middles = np.unique(faces[:, 3:])
    nodes = cells.nodes_m.copy()
    nodes[middles] = facets.nearest(nodes[middles]).points_m
    bent = Tetrahedra(nodes, cells.elements)
    for _ in range(4):
        bad = bent.least_jacobian() < _BEND
        if not np.any(bad):
            return bent
        back = np.unique(cells.elements[bad, 4:])
        nodes = bent.nodes_m.copy()
        nodes[back] = cells.nodes_m[back]
        bent = Tetrahedra(nodes, cells.elements)
    return bent if np.all(bent.least_jacobian() > 0.0) else cells


def _skin(cells: Tetrahedra, facets: Facets) -> Skin:
    faces = cells.boundary()
    small = np.concatenate([faces[:, [0, 3, 5]], faces[:, [3, 1, 4]], faces[:, [5, 4, 2]], faces[:, [3, 4, 5]]])
    corners = cells.nodes_m[small]
    area = 0.5 * np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    size = np.linalg.norm(area, axis=1)
    kept = size > 0.0
    third = np.repeat(area[:, None] / 3.0, 3, axis=1)
    nodes = {"surface": gathered(small, third, np.linalg.norm(third, axis=2))}
    # One sample for each face of an element: its four parts together.
    whole = area.reshape(4, len(faces), 3).sum(axis=0)
    length = np.linalg.norm(whole, axis=1)
    middle = cells.nodes_m[faces[:, 3:]].mean(axis=1)
    shown = (facets.points_m, facets.triangles)
    if len(facets.triangles) > _SHOWN:
        used, place = np.unique(small[kept], return_inverse=True)
        shown = (cells.nodes_m[used], place.reshape(-1, 3))
    return Skin(middle, whole / length[:, None], length, nodes, _shown(*shown))


def _shown(points: Array, triangles: IntArray) -> Surface:
    """Sheets that meet at edges, each smooth in itself."""
    facets = Facets(points, triangles)
    edges = np.sort(np.concatenate([triangles[:, [k, (k + 1) % 3]] for k in range(3)]), axis=1)
    owner = np.tile(np.arange(len(triangles)), 3)
    order = np.lexsort((edges[:, 1], edges[:, 0]))
    same = np.all(edges[order][1:] == edges[order][:-1], axis=1)
    one, two = owner[order[:-1][same]], owner[order[1:][same]]
    smooth = np.einsum("pi,pi->p", facets.normals[one], facets.normals[two]) > _SMOOTH
    graph = coo_matrix((np.ones(int(smooth.sum())), (one[smooth], two[smooth])), shape=(len(triangles),) * 2)
    count, group = connected_components(graph, directed=False)
    # What has more sheets than these is rough: the rest is shown as one.
    group = np.minimum(group, _SHEETS)
    return join([(points, triangles[group == number]) for number in range(min(count, _SHEETS + 1))])


def mesh_spot(spec: BodySpec, spot: SpotSpec, *, spread_m: float, size_m: Array) -> SurfaceSpot:
    """Find a spot of a solid from a file; raises ``BodyError`` off the body."""
    facets = facets_of(spec)
    if spot.point_m is not None:
        wish = np.array(spot.point_m)
        found = facets.nearest(wish[None])
        off, size = float(found.distance_m[0]), float(size_m.max())
        if off > REACH * size and not _inside(facets, wish):
            raise BodyError(
                what=f"the spot {np.round(wish, 6).tolist()} m lies {off:g} m off the body",
                where=f"body {spec.name!r}",
                fix=f"give a point on the surface, in the body's own frame: about its mass centre, {size:g} m long",
            )
        place = found.points_m[0]
    else:
        place = facets.leaving(_way(spot))
    normal = facets.normals[facets.nearest(place[None]).triangle[0]]
    thickness = float(size_m.min())
    return SurfaceSpot(
        point_m=place,
        normal=normal,
        curvature_1_m=facets.curvatures(place, normal),
        young_pa=young_along(spec, normal),
        poisson=spec.material.poisson[0],
        thickness_m=thickness,
        spread_m=min(spread_m, 0.4 * thickness),
    )


def _inside(facets: Facets, point: Array) -> bool:
    """Whether the surface, seen from a point, fills the sphere (Van Oosterom & Strackee 1983)."""
    a, b, c = (facets.corners[:, k] - point for k in range(3))
    one, two, three = (np.linalg.norm(p, axis=1) for p in (a, b, c))
    above = np.einsum("ti,ti->t", a, np.cross(b, c))
    dots = [np.einsum("ti,ti->t", p, q) for p, q in ((a, b), (b, c), (c, a))]
    below = one * two * three + dots[0] * three + dots[1] * one + dots[2] * two
    return float(2.0 * np.arctan2(above, below).sum()) > 2.0 * np.pi


def _way(spot: SpotSpec) -> Array:
    if spot.toward is not None:
        way = np.array(spot.toward)
        return np.asarray(way / np.linalg.norm(way))
    if spot.fraction is not None:
        u, v = (*spot.fraction, 0.0)[:2]
        down, turn = np.pi * u, 2.0 * np.pi * v
        return np.array([np.sin(down) * np.cos(turn), np.cos(down), np.sin(down) * np.sin(turn)])
    axis, sign = SIDES[str(spot.name)]
    way = np.zeros(3)
    way[axis] = sign
    return way
