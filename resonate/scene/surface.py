"""The surface of a solid from a file: loaded, put into metres, mended, and set about its mass centre."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from resonate.scene.crossing import crossings
from resonate.scene.mend import mend, signed_volume
from resonate.scene.refused import RefusedError, shown

if TYPE_CHECKING:
    from pathlib import Path

    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    IntArray = NDArray[np.int64]

UNITS = {"m": 1.0, "cm": 0.01, "mm": 0.001, "in": 0.0254, "ft": 0.3048}
#: Formats that can be read.
ENDINGS = (".obj", ".stl", ".ply", ".glb", ".off")
#: More triangles than this are more than any mesh of elements could follow.
MOST_TRIANGLES = 300_000
# Bytes of one triangle in a binary file of triangles, and at the least in a text.
_STL_HEAD, _STL_BYTES, _TEXT_BYTES = 84, 50, 120
# Sizes that props do not have: the unit is likely to be wrong.
_SMALL_M, _LARGE_M = 2e-3, 10.0


@dataclass(frozen=True, slots=True)
class SolidSurface:
    """A closed surface about its mass centre.

    ``points_m`` (n, 3), ``triangles`` (t, 3) counter-clockwise from outside, ``shift_m`` (3,) what was the mass centre
    in the file, ``notes`` what was changed or looks odd.
    """

    points_m: Array
    triangles: IntArray
    shift_m: Array
    notes: tuple[str, ...]

    @property
    def content(self) -> str:
        """SHA-256 of points and triangles."""
        told = hashlib.sha256(np.ascontiguousarray(self.points_m).tobytes())
        told.update(np.ascontiguousarray(self.triangles).tobytes())
        return told.hexdigest()


def load_surface(path: Path, unit: str | None) -> SolidSurface:
    """Read and mend the surface of a solid.

    Parameters
    ----------
    path : Path
        OBJ, STL, PLY, GLB or OFF.
    unit : str or None
        Of its numbers; GLB is in metres by its standard, others must say.

    Raises
    ------
    RefusedError
        With the reason, where it is not the closed surface of one piece.
    """
    ending = path.suffix.lower()
    if ending not in ENDINGS:
        raise RefusedError(f"{shown(path.name)} is not a mesh that can be read", f"use one of {', '.join(ENDINGS)}")
    if unit is None and ending != ".glb":
        raise RefusedError(
            f"{shown(path.name)} does not say in which unit its numbers are", 'add unit = "mm", or another'
        )
    points, triangles = _read(path, ending)
    mended = mend(points * UNITS[unit or "m"], triangles)
    found = crossings(mended.points_m, mended.triangles)
    if found:
        raise RefusedError(
            f"a surface that runs through itself ({'1000 or more' if found >= 1000 else found} crossings)",  # noqa: PLR2004
            "resolve the overlaps in a modelling program (a union does it)",
        )
    centre = _centre(mended.points_m, mended.triangles)
    notes = [f"{path.name}: {note}" for note in mended.notes]
    size = float(np.ptp(mended.points_m, axis=0).max())
    if not _SMALL_M <= size <= _LARGE_M:
        notes.append(f"{path.name}: it is {size:g} m large; is unit = {shown(unit or 'm')} right?")
    return SolidSurface(mended.points_m - centre, mended.triangles, centre, tuple(notes))


def _centre(points: Array, triangles: IntArray) -> Array:
    middle = points.mean(axis=0)
    corners = points[triangles] - middle
    parts = np.einsum("ti,ti->t", corners[:, 0], np.cross(corners[:, 1], corners[:, 2])) / 6.0
    return np.asarray(middle + parts @ corners.sum(axis=1) / (4.0 * signed_volume(points, triangles)))


def _read(path: Path, ending: str) -> tuple[Array, IntArray]:
    try:
        size = path.stat().st_size
        with path.open("rb") as file:
            head = file.read(_STL_HEAD)
    except OSError as error:
        raise RefusedError(f"{shown(str(path))} cannot be read: {error.strerror}", "check the path") from error
    if size == 0:
        raise RefusedError(f"{shown(path.name)} is empty", "export the mesh again")
    count = _about(ending, head, size)
    if count > MOST_TRIANGLES:
        raise _too_many(count, path)
    try:
        import trimesh

        mesh: Any = trimesh.load(path, force="mesh", process=False)
        points = np.array(mesh.vertices, dtype=np.float64)
        triangles = np.array(mesh.faces, dtype=np.int64)
    except ImportError as error:
        raise RefusedError("reading meshes needs trimesh, which is missing", "pip install trimesh") from error
    except Exception as error:
        raise RefusedError(
            f"{shown(path.name)} is not a {ending[1:].upper()} file that can be read ({type(error).__name__})",
            "export it again, or check that its ending is right",
        ) from error
    if not len(triangles) or points.ndim != 2:  # noqa: PLR2004 (rows of coordinates)
        raise RefusedError(f"{shown(path.name)} holds no triangles", "export the surface of a solid as triangles")
    if len(triangles) > MOST_TRIANGLES:
        raise _too_many(len(triangles), path)
    if triangles.min() < 0 or triangles.max() >= len(points):
        raise RefusedError(f"{shown(path.name)} names points that it does not hold", "export the mesh again")
    return points, triangles


def _about(ending: str, head: bytes, size: int) -> int:
    """How many triangles a file of so many bytes may hold, before it is read."""
    if ending == ".stl" and len(head) == _STL_HEAD:
        told = int.from_bytes(head[80:], "little")
        # The length of a binary file follows from its count.
        return told if size == _STL_HEAD + _STL_BYTES * told else size // (2 * _TEXT_BYTES)
    # Binary files may hold other things as well: they are counted when they are read.
    binary = ending == ".glb" or b"binary" in head
    return size // (3 * _TEXT_BYTES) if binary else size // _TEXT_BYTES


def _too_many(count: int, path: Path) -> RefusedError:
    return RefusedError(
        f"{shown(path.name)} holds about {count:.2g} triangles; at most {MOST_TRIANGLES} can be followed",
        "decimate it in a modelling program; 20000 triangles are plenty for sound",
    )
