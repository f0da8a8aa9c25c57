"""One meshing job in a process of its own: meshers crash, hang and print, and cannot be stopped from inside.

Run as ``python -m resonate.body.mesher_job JOB OUT WHICH`` in an empty folder.
"""

from __future__ import annotations

import sys
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    IntArray = NDArray[np.int64]


def _write_stl(path: Path, corners: Array) -> None:
    """Binary STL of triangles (t, 3, 3); the format has single precision only."""
    rows = np.zeros(len(corners), dtype=[("normal", "<f4", 3), ("corners", "<f4", (3, 3)), ("spare", "<u2")])
    rows["corners"] = corners
    normal = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    # The reader goes by these to find edges.
    rows["normal"] = normal / np.maximum(np.linalg.norm(normal, axis=1, keepdims=True), 1e-300)
    path.write_bytes(bytes(80) + len(corners).to_bytes(4, "little") + rows.tobytes())


def _fill_clean(points: Array, triangles: IntArray, size: float) -> tuple[Array, IntArray]:
    """Netgen: advancing front; the same mesh every time; clean surfaces only."""
    import netgen.meshing
    import netgen.stl

    # The reader works in single precision: near one, not at the scale of the body.
    scale = float(np.ptp(points, axis=0).max())
    _write_stl(Path("surface.stl"), points[triangles] / scale * 100.0)
    geometry = netgen.stl.STLGeometry("surface.stl")
    mesh = geometry.GenerateMesh(maxh=size / scale * 100.0)
    nodes = np.array([tuple(point.p) for point in mesh.Points()], dtype=np.float64) * scale / 100.0
    cells = np.array([[node.nr - 1 for node in cell.vertices] for cell in mesh.Elements3D()], dtype=np.int64)
    return nodes, cells.reshape(-1, 4) if cells.size else np.zeros((0, 4), dtype=np.int64)


def _fill_any(points: Array, triangles: IntArray, size: float) -> tuple[Array, IntArray]:
    """FTetWild: robust, slow, another mesh every time (so that what it made is kept)."""
    import importlib
    import types

    # It asks for a viewer that it does not use.
    sys.modules.setdefault("pyvista", types.ModuleType("pyvista"))
    mesher = importlib.import_module("pytetwild")

    diagonal = float(np.linalg.norm(np.ptp(points, axis=0)))
    nodes, cells = mesher.tetrahedralize(
        points, triangles.astype(np.int32), edge_length_fac=min(size / diagonal, 0.2), optimize=True
    )
    return np.asarray(nodes, dtype=np.float64), np.asarray(cells, dtype=np.int64)


def _positive(nodes: Array, cells: IntArray) -> IntArray:
    sides = nodes[cells[:, 1:]] - nodes[cells[:, :1]]
    turned = np.linalg.det(sides) < 0.0
    cells = cells.copy()
    cells[turned] = cells[turned][:, [0, 2, 1, 3]]
    return cells


def main(job: str, out: str, which: str) -> None:
    """Read the surface and the size of elements, write nodes and tetrahedra."""
    with np.load(job, allow_pickle=False) as told:
        points, triangles, size = told["points"], told["triangles"], float(told["size"])
    nodes, cells = (_fill_clean if which == "clean" else _fill_any)(points, triangles, size)
    if len(cells):
        used, place = np.unique(cells, return_inverse=True)
        nodes, cells = nodes[used], place.reshape(-1, 4)
        cells = _positive(nodes, cells)
    np.savez(out, nodes=nodes, cells=cells)


if __name__ == "__main__":
    main(*sys.argv[1:])
