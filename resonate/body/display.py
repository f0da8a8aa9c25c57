"""Closed display meshes from sheets of points."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy.sparse import coo_matrix
from scipy.sparse.csgraph import connected_components

from resonate.body.body import Surface

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    IntArray = NDArray[np.int64]
    Sheet = tuple[Array, IntArray]


# Cosine of the angle between triangles from which their edge is a crease: 40 degrees.
_CREASE = 0.766


def quad_triangles(quads: IntArray) -> IntArray:
    """Two triangles (2 q, 3) for each quadrilateral (q, 4), same winding."""
    return np.concatenate((quads[:, [0, 1, 2]], quads[:, [0, 2, 3]]))


def lattice(points_m: Array) -> Sheet:
    """A sheet from a lattice (a, b, 3) of points; winding a x b."""
    rows, columns = points_m.shape[:2]
    number = np.arange(rows * columns).reshape(rows, columns)
    quads = np.stack((number[:-1, :-1], number[1:, :-1], number[1:, 1:], number[:-1, 1:]), axis=2)
    return points_m.reshape(-1, 3), quad_triangles(quads.reshape(-1, 4))


def _creased(faces: IntArray, unit: Array) -> tuple[IntArray, IntArray]:
    """Give a vertex on a crease one copy for each side of it.

    Returns triangles (t, 3) over the copies, and the vertex (v,) that each is a copy of.
    """
    corner = faces.ravel()
    order = np.argsort(corner, kind="stable")
    owner, side = corner[order], unit[order // 3]
    tied: list[tuple[IntArray, IntArray]] = []
    for step in range(1, int(np.bincount(corner).max(initial=1))):
        first = np.flatnonzero(owner[:-step] == owner[step:])
        close = np.einsum("kd,kd->k", side[first], side[first + step]) > _CREASE
        tied.append((order[first[close]], order[first[close] + step]))
    rows = np.concatenate([pair[0] for pair in tied] or [order[:0]])
    columns = np.concatenate([pair[1] for pair in tied] or [order[:0]])
    graph = coo_matrix((np.ones(len(rows)), (rows, columns)), shape=(len(corner), len(corner)))
    count, copy = connected_components(graph, directed=False)
    vertex = np.zeros(count, dtype=np.int64)
    vertex[copy] = corner
    return copy.reshape(faces.shape).astype(np.int64), vertex


def join(sheets: list[Sheet], centre_m: Array | None = None) -> Surface:
    """Put sheets together, each with its own normals, crisp at its edges and creases.

    Zero-area triangles are left out. With ``centre_m`` (3,) a sheet that faces the centre is turned over.
    """
    points, normals, triangles = [], [], []
    offset = 0
    for sheet_points, sheet_triangles in sheets:
        corners = sheet_points[sheet_triangles]
        area = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
        size = np.linalg.norm(area, axis=1)
        solid = size > 1e-12 * max(float(size.max(initial=0.0)), 1e-300)
        faces, area = sheet_triangles[solid], area[solid]
        if centre_m is not None and len(faces):
            middle = corners[solid].mean(axis=1) - centre_m
            if float(np.sum(middle * area)) < 0.0:
                faces, area = faces[:, ::-1], -area
        faces, vertex = _creased(faces, area / np.linalg.norm(area, axis=1, keepdims=True))
        normal = np.zeros((len(vertex), 3))
        for corner in range(3):
            np.add.at(normal, faces[:, corner], area)
        points.append(sheet_points[vertex])
        normals.append(normal / np.linalg.norm(normal, axis=1, keepdims=True))
        triangles.append(faces + offset)
        offset += len(vertex)
    return Surface(
        points_m=np.concatenate(points),
        normals=np.concatenate(normals),
        triangles=np.concatenate(triangles).astype(np.int64),
    )
