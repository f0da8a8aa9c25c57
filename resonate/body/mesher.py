"""Tetrahedra inside a closed surface: made in a subprocess with a time limit, kept by content."""

from __future__ import annotations

import hashlib
import importlib.util
import os
import subprocess
import sys
import tempfile
import zipfile
from contextlib import suppress
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from resonate.body.tetra import Tetrahedra
from resonate.errors import BodyError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    IntArray = NDArray[np.int64]

# Seconds that a mesher may take: the quick one, and the robust one.
_PATIENCE_S = {"clean": 60.0, "any": 240.0}
_MODULES = {"clean": "netgen", "any": "pytetwild"}
# By this share the volume of straight elements may miss that of the surface: chords cut off much of a ball.
_VOLUME = 0.12
# Raise when meshes are made differently.
_VERSION = 2


def _folder() -> Path:
    given = os.environ.get("RESONATE_CACHE", "")
    if given:
        return Path(given) / "tetrahedra"
    from platformdirs import user_cache_path

    return user_cache_path("resonate", appauthor=False) / "tetrahedra"


def fill(points_m: Array, triangles: IntArray, *, size_m: float, volume_m3: float, name: str) -> Tetrahedra:
    """Fill a closed surface with straight quadratic tetrahedra of about ``size_m``.

    Raises
    ------
    BodyError
        If no mesher is installed, or none can do it.
    """
    told = hashlib.sha256(f"{_VERSION} {size_m:.6e}".encode())
    told.update(np.ascontiguousarray(points_m).tobytes())
    told.update(np.ascontiguousarray(triangles).tobytes())
    kept = _folder() / f"{told.hexdigest()}.npz"
    found = _read(kept)
    if found is not None:
        return found
    reasons = []
    here = {"netgen": importlib.util.find_spec("netgen"), "pytetwild": importlib.util.find_spec("pytetwild")}
    for which, module in _MODULES.items():
        if here[module] is None:
            reasons.append(f"{module} is not installed")
            continue
        made, reason = _run(which, points_m, triangles, size_m)
        if made is not None:
            share = _volume(made) / volume_m3 - 1.0
            if abs(share) <= _VOLUME:
                _keep(kept, made)
                return made
            reason = f"its tetrahedra miss the volume by {share:.1%}"
        reasons.append(f"{module}: {reason}")
    missing = all("not installed" in reason for reason in reasons)
    raise BodyError(
        what=f"the solid could not be filled with elements ({'; '.join(reasons)})",
        where=f"body {name!r}",
        fix='install a mesher: python -m pip install "resonate-cosim[mesh]"'
        if missing
        else "simplify the surface: fewer slivers and thin slots, about equal triangles",
    )


def _volume(cells: Tetrahedra) -> float:
    sides = cells.nodes_m[cells.elements[:, 1:4]] - cells.nodes_m[cells.elements[:, :1]]
    return float(np.linalg.det(sides).sum() / 6.0)


def _run(which: str, points: Array, triangles: IntArray, size_m: float) -> tuple[Tetrahedra | None, str]:
    with tempfile.TemporaryDirectory(ignore_cleanup_errors=True) as folder:
        job, out = Path(folder) / "job.npz", Path(folder) / "out.npz"
        np.savez(job, points=points, triangles=triangles, size=size_m)
        search = os.pathsep.join(path for path in sys.path if path)
        command = [sys.executable, "-m", "resonate.body.mesher_job", str(job), str(out), which]
        try:
            done = subprocess.run(  # noqa: S603 (our own interpreter and module)
                command,
                cwd=folder,
                env={**os.environ, "PYTHONPATH": search, "OMP_NUM_THREADS": "1"},
                capture_output=True,
                check=False,
                timeout=_PATIENCE_S[which],
            )
        except subprocess.TimeoutExpired:
            return None, f"not done in {_PATIENCE_S[which]:.0f} s"
        made = _read(out)
        if made is not None:
            return made, ""
        last = done.stderr.decode(errors="replace").strip().splitlines()
        return None, last[-1][:120] if last and done.returncode else "made no elements"


def _read(path: Path) -> Tetrahedra | None:
    try:
        with np.load(path, allow_pickle=False) as kept:
            nodes, cells = kept["nodes"], kept["cells"]
    except (OSError, ValueError, KeyError, zipfile.BadZipFile):
        return None
    return Tetrahedra.of(nodes, cells) if len(cells) else None


def _keep(path: Path, made: Tetrahedra) -> None:
    # A store that cannot be written only costs time.
    with suppress(OSError):
        path.parent.mkdir(parents=True, exist_ok=True)
        with tempfile.NamedTemporaryFile(dir=path.parent, suffix=".part", delete=False) as part:
            corners = made.elements[:, :4]
            np.savez(part, nodes=made.nodes_m[: int(corners.max()) + 1], cells=corners)
        Path(part.name).replace(path)
