"""Closed display meshes from sheets of points."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.body.body import Surface

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    IntArray = NDArray[np.int64]
    Sheet = tuple[Array, IntArray]


def quad_triangles(quads: IntArray) -> IntArray:
    """Two triangles (2 q, 3) for each quadrilateral (q, 4), same winding."""
    return np.concatenate((quads[:, [0, 1, 2]], quads[:, [0, 2, 3]]))


def lattice(points_m: Array) -> Sheet:
    """A sheet from a lattice (a, b, 3) of points; winding a x b."""
    rows, columns = points_m.shape[:2]
    number = np.arange(rows * columns).reshape(rows, columns)
    quads = np.stack((number[:-1, :-1], number[1:, :-1], number[1:, 1:], number[:-1, 1:]), axis=2)
    return points_m.reshape(-1, 3), quad_triangles(quads.reshape(-1, 4))


def join(sheets: list[Sheet], centre_m: Array | None = None) -> Surface:
    """Put sheets together, each with its own crisp normals.

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
        normal = np.zeros_like(sheet_points)
        for corner in range(3):
            np.add.at(normal, faces[:, corner], area)
        length = np.linalg.norm(normal, axis=1)
        used = np.flatnonzero(length > 0.0)
        place = np.full(len(sheet_points), -1, dtype=np.int64)
        place[used] = np.arange(len(used)) + offset
        points.append(sheet_points[used])
        normals.append(normal[used] / length[used, None])
        triangles.append(place[faces])
        offset += len(used)
    return Surface(
        points_m=np.concatenate(points),
        normals=np.concatenate(normals),
        triangles=np.concatenate(triangles).astype(np.int64),
    )
