"""Mend the surface of a solid, as far as no guessing is needed, and tell what was changed."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from resonate.scene.refused import RefusedError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    IntArray = NDArray[np.int64]

# Points closer than this share of the size are one point.
_WELD = 1e-6
# A triangle whose height is below this share of the size has no area.
_FLAT = 1e-7
# A hole of at most so many edges, no wider than this share of the size, is closed; a larger one is meant.
_HOLE_EDGES = 64
_HOLE_WIDTH = 0.06
_LEAST_TRIANGLES = 4


@dataclass(frozen=True)
class Mended:
    """A closed surface: ``points_m`` (n, 3), ``triangles`` (t, 3) counter-clockwise from outside, and what was done."""

    points_m: Array
    triangles: IntArray
    notes: tuple[str, ...]


def mend(points_m: Array, triangles: IntArray) -> Mended:
    """Weld seams, drop empty and double faces, turn the winding, close small holes; refuse what is not one solid.

    Raises
    ------
    RefusedError
        If what is left is not the closed surface of one piece.
    """
    if not np.all(np.isfinite(points_m)):
        count = int(np.count_nonzero(~np.all(np.isfinite(points_m), axis=1)))
        raise RefusedError(f"{count} of its points are not numbers", "export the mesh again without them")
    notes: list[str] = []
    points, faces = _welded(points_m, triangles, notes)
    faces = _without_flat(points, faces, notes)
    faces = _without_double(faces, notes)
    if len(faces) < _LEAST_TRIANGLES:
        raise RefusedError(f"{len(faces)} triangles with an area", "a solid needs a closed surface with a volume")
    edges, _ = _edges(faces)
    _, times = np.unique(np.sort(edges, axis=1), axis=0, return_counts=True)
    if np.any(times > 2):  # noqa: PLR2004 (an edge has two sides)
        raise RefusedError(
            f"{int(np.count_nonzero(times > 2))} edges with more than two faces",  # noqa: PLR2004
            "remove inner walls and touching parts: each edge of a solid has two faces",
        )
    faces = _wound(faces, notes)
    points, faces = _filled(points, faces, notes)
    faces, parts = _outward(points, faces, notes)
    if parts > 1:
        raise RefusedError(
            f"{parts} separate parts",
            "give each part a body of its own, or join them into one surface in a modelling program",
        )
    used, place = np.unique(faces, return_inverse=True)
    return Mended(points[used], place.reshape(faces.shape).astype(np.int64), tuple(notes))


def _size(points: Array) -> float:
    return float(np.linalg.norm(np.ptp(points, axis=0)))


def _welded(points: Array, faces: IntArray, notes: list[str]) -> tuple[Array, IntArray]:
    from scipy.sparse import coo_matrix
    from scipy.sparse.csgraph import connected_components
    from scipy.spatial import cKDTree

    used, place = np.unique(faces, return_inverse=True)
    points, faces = points[used], place.reshape(faces.shape)
    size = _size(points)
    if not size > 0.0:
        raise RefusedError("all of its points are one", "a solid needs a closed surface with a volume")
    # Equal points first: they are many in files that list each triangle's corners anew.
    points, same = np.unique(points, axis=0, return_inverse=True)
    faces = same.ravel()[faces]
    pairs = cKDTree(points).query_pairs(_WELD * size, output_type="ndarray")
    if len(pairs):
        graph = coo_matrix((np.ones(len(pairs)), (pairs[:, 0], pairs[:, 1])), shape=(len(points),) * 2)
        _, group = connected_components(graph, directed=False)
        _, first = np.unique(group, return_index=True)
        points, faces = points[first], group[faces]
    if len(used) - len(points):
        notes.append(f"{len(used) - len(points)} doubled points along seams welded")
    return points, faces.astype(np.int64)


def _without_flat(points: Array, faces: IntArray, notes: list[str]) -> IntArray:
    """Drop triangles without area; where one is three points in a row, its neighbour gets the middle point."""
    repeated = (faces[:, 0] == faces[:, 1]) | (faces[:, 1] == faces[:, 2]) | (faces[:, 2] == faces[:, 0])
    dropped = int(np.count_nonzero(repeated))
    faces = faces[~repeated]
    corners = points[faces]
    sides = np.linalg.norm(corners - np.roll(corners, -1, axis=1), axis=2)
    area = np.linalg.norm(np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0]), axis=1)
    flat = area <= _FLAT * _size(points) * sides.max(axis=1, initial=0.0)
    if np.any(flat):
        dropped += int(np.count_nonzero(flat))
        kept = [tuple(int(k) for k in face) for face in faces[~flat]]
        for face, lengths in zip(faces[flat], sides[flat], strict=True):
            longest = int(np.argmax(lengths))
            a, c, b = (int(face[(longest + k) % 3]) for k in range(3))
            for number, other in enumerate(kept):
                if a in other and c in other and b not in other:
                    at = next(k for k in range(3) if {other[k], other[(k + 1) % 3]} == {a, c})
                    one, two, three = other[at], other[(at + 1) % 3], other[(at + 2) % 3]
                    kept[number] = (one, b, three)
                    kept.append((b, two, three))
                    break
        faces = np.array(kept, dtype=np.int64).reshape(-1, 3)
    if dropped:
        notes.append(f"{dropped} triangles without area removed")
    return faces


def _without_double(faces: IntArray, notes: list[str]) -> IntArray:
    _, first = np.unique(np.sort(faces, axis=1), axis=0, return_index=True)
    if len(faces) - len(first):
        notes.append(f"{len(faces) - len(first)} doubled triangles removed")
    return faces[np.sort(first)]


def _edges(faces: IntArray) -> tuple[IntArray, IntArray]:
    """Directed edges (3 t, 2) and the triangle (3 t,) of each."""
    edges = np.concatenate([faces[:, [k, (k + 1) % 3]] for k in range(3)])
    return edges, np.tile(np.arange(len(faces)), 3)


def _neighbours(faces: IntArray) -> tuple[IntArray, NDArray[np.bool_]]:
    """Pairs (p, 2) of triangles with a common edge, and whether they run along it the same way (p,)."""
    edges, owner = _edges(faces)
    upward = edges[:, 0] < edges[:, 1]
    key = np.sort(edges, axis=1)
    order = np.lexsort((key[:, 1], key[:, 0]))
    same = np.all(key[order][1:] == key[order][:-1], axis=1)
    one, two = order[:-1][same], order[1:][same]
    return np.stack((owner[one], owner[two]), axis=1), upward[one] == upward[two]


def _wound(faces: IntArray, notes: list[str]) -> IntArray:
    from scipy.sparse import coo_matrix
    from scipy.sparse.csgraph import breadth_first_order, connected_components

    pairs, against = _neighbours(faces)
    if not np.any(against):
        return faces
    count = len(faces)
    value = np.where(against, 2.0, 1.0)
    graph = coo_matrix((value, (pairs[:, 0], pairs[:, 1])), shape=(count, count)).tocsr()
    graph = graph.maximum(graph.T).tocsr()
    flip = np.zeros(count, dtype=bool)
    parts, group = connected_components(graph, directed=False)
    for part in range(parts):
        order, before = breadth_first_order(graph, int(np.argmax(group == part)), directed=False)
        steps = np.asarray(graph[before[order[1:]], order[1:]]).ravel() > 1.5  # noqa: PLR2004 (between 1 and 2)
        for face, turned in zip(order[1:], steps, strict=True):
            flip[face] = flip[before[face]] ^ turned
        if 2 * int(np.count_nonzero(flip[order])) > len(order):
            flip[order] = ~flip[order]
    faces = np.where(flip[:, None], faces[:, ::-1], faces)
    if np.any(_neighbours(faces)[1]):
        raise RefusedError("a surface with one side only", "cut it open where it is twisted, and close it anew")
    notes.append(f"{int(np.count_nonzero(flip))} triangles turned over, so that all face one way")
    return faces


def _filled(points: Array, faces: IntArray, notes: list[str]) -> tuple[Array, IntArray]:
    edges, _ = _edges(faces)
    there = {(int(a), int(b)) for a, b in edges}
    ends = [(b, a) for a, b in there if (b, a) not in there]
    if not ends:
        return points, faces
    after: dict[int, int] = dict(ends)
    if len(after) < len(ends):
        raise RefusedError("holes that touch in a point", "close the holes in a modelling program")
    size, closed = _size(points), 0
    while after:
        start, here = next(iter(after.items()))
        del after[start]
        loop = [start]
        while here != start:
            loop.append(here)
            here = after.pop(here)
        width = _size(points[loop])
        if len(loop) > _HOLE_EDGES or width > _HOLE_WIDTH * size:
            raise RefusedError(
                f"an open surface: a hole of {len(loop)} edges, {width / size:.0%} of its size wide",
                "a solid needs a closed surface: close it in a modelling program",
            )
        middle = len(points)
        points = np.concatenate((points, points[loop].mean(axis=0)[None]))
        fan = [(a, b, middle) for a, b in zip(loop, loop[1:] + loop[:1], strict=True)]
        if len(loop) == 3:  # noqa: PLR2004 (a triangle)
            points, fan = points[:-1], [(loop[0], loop[1], loop[2])]
        faces = np.concatenate((faces, np.array(fan)))
        closed += 1
    notes.append(f"{closed} small hole{'s' if closed > 1 else ''} closed")
    return points, faces


def signed_volume(points: Array, faces: IntArray) -> float:
    """Volume, m^3, positive where the faces look outwards."""
    corners = points[faces] - points[faces[0, 0]]
    return float(np.einsum("ti,ti->", corners[:, 0], np.cross(corners[:, 1], corners[:, 2])) / 6.0)


def _outward(points: Array, faces: IntArray, notes: list[str]) -> tuple[IntArray, int]:
    from scipy.sparse import coo_matrix
    from scipy.sparse.csgraph import connected_components

    pairs, _ = _neighbours(faces)
    count = len(faces)
    graph = coo_matrix((np.ones(len(pairs)), (pairs[:, 0], pairs[:, 1])), shape=(count, count))
    parts, _ = connected_components(graph, directed=False)
    volume = signed_volume(points, faces)
    if parts == 1 and abs(volume) < 1e-9 * _size(points) ** 3:
        raise RefusedError("a surface that encloses nothing", "a solid needs a closed surface with a volume")
    if parts == 1 and volume < 0.0:
        notes.append("turned inside out")
        faces = faces[:, ::-1]
    return faces, parts
