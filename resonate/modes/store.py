"""Solved modes on disk, keyed by what they depend on; a damaged or foreign entry is simply a miss."""

from __future__ import annotations

import contextlib
import hashlib
import importlib.util
import json
import os
import tempfile
import warnings
import zipfile
import zlib
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import scipy

from resonate.modes.modeset import Decay, ModeSet

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from resonate.body.body import Body

    Array = NDArray[np.float64]

# Layout of an entry. Raise it when the arrays or the header change their meaning.
FORMAT = 1
# Raise it when the solver would give other modes or decays for the same body.
SOLVER = 1
CAUSES = ("material", "thermoelastic", "support", "radiation")
FACTS = ("body", "key", "heard", "heard_hz", "solved_hz", "swing")
# What a damaged archive can raise, from the zip directory down to the text of an array header.
DAMAGE = (
    OSError,
    ValueError,
    KeyError,
    TypeError,
    EOFError,
    MemoryError,
    OverflowError,
    RuntimeError,
    SyntaxError,
    zipfile.BadZipFile,
    zlib.error,
)


@dataclass(frozen=True, slots=True)
class Entry:
    """Arrays by name, and small facts (JSON values) by name."""

    arrays: dict[str, Array]
    facts: dict[str, Any]


def _digest(arrays: Mapping[str, Array], facts: Mapping[str, Any]) -> str:
    seal = hashlib.sha256(json.dumps(facts, sort_keys=True).encode())
    for name in sorted(arrays):
        array = arrays[name]
        seal.update(f"{name}:{array.dtype.str}:{array.shape}".encode())
        seal.update(np.ascontiguousarray(array).data)
    return seal.hexdigest()


def content_key(*parts: object) -> str:
    """Hexadecimal SHA-256 of some text, numbers and arrays, for use as a key."""
    seal = hashlib.sha256()
    for part in parts:
        if isinstance(part, np.ndarray):
            seal.update(f"{part.dtype.str}:{part.shape}:".encode())
            seal.update(np.ascontiguousarray(part).data)
        else:
            seal.update(f"{part!r};".encode())
    return seal.hexdigest()


@dataclass(frozen=True, slots=True)
class ModeStore:
    """A folder of entries, one ``.npz`` each, safe to share between processes.

    Parameters
    ----------
    path : Path
        The folder; made when first needed.
    """

    path: Path

    def __post_init__(self) -> None:
        """Accept text too."""
        object.__setattr__(self, "path", Path(self.path))

    def place(self, kind: str, key: str) -> Path:
        """Name the file of one entry."""
        return self.path / f"{kind}-{key}.npz"

    def load(self, kind: str, key: str) -> Entry | None:
        """Read one entry; None if there is none, or not a sound one of this kind, key and version."""
        try:
            with warnings.catch_warnings():
                warnings.simplefilter("ignore")  # numpy's remarks about damaged headers
                with (
                    self.place(kind, key).open(
                        "rb"
                    ) as file,  # numpy leaves it open when the archive is broken
                    np.load(file, allow_pickle=False) as archive,
                ):
                    arrays = {name: archive[name] for name in archive.files}
            header = json.loads(arrays.pop("header").tobytes())
            facts = header.pop("facts")
            expected = {"format": FORMAT, "kind": kind, "key": key, "sha256": _digest(arrays, facts)}
            shapes = {name: list(array.shape) for name, array in arrays.items()}
            sound = header == {**expected, "shapes": shapes}
        except DAMAGE:
            return None
        return Entry(arrays=arrays, facts=facts) if sound else None

    def save(
        self, kind: str, key: str, arrays: Mapping[str, Array], *, facts: Mapping[str, Any] | None = None
    ) -> str:
        """Write one entry whole or not at all.

        Returns
        -------
        str
            Empty, or a warning for a person when the folder cannot be written.
        """
        facts = dict(facts or {})
        header = {
            "format": FORMAT,
            "kind": kind,
            "key": key,
            "shapes": {name: list(array.shape) for name, array in arrays.items()},
            "sha256": _digest(arrays, facts),
            "facts": facts,
        }
        text = np.frombuffer(json.dumps(header, sort_keys=True).encode(), dtype=np.uint8)
        target, draft = self.place(kind, key), None
        try:
            self.path.mkdir(parents=True, exist_ok=True)
            with tempfile.NamedTemporaryFile(dir=self.path, suffix=".part", delete=False) as file:
                draft = Path(file.name)
                np.savez(file, header=text, **arrays)  # type: ignore[arg-type]
            os.replace(draft, target)  # noqa: PTH105 (the atomic form, named as such)
        except OSError as error:
            if draft is not None:
                with contextlib.suppress(OSError):
                    draft.unlink(missing_ok=True)
            return (
                f"solved modes could not be kept in {self.path} ({error.strerror or error}): the next run "
                "solves them again; set RESONATE_CACHE to a folder that can be written"
            )
        return ""


def default_store() -> ModeStore:
    """Name the store in ``RESONATE_CACHE`` if that is set, else in the user's cache folder."""
    given = os.environ.get("RESONATE_CACHE", "")
    if given:
        return ModeStore(Path(given) / "modes")
    from platformdirs import user_cache_path

    return ModeStore(user_cache_path("resonate", appauthor=False) / "modes")


def modes_key(body: Body, *, solved_hz: float) -> str:
    """Key of a body's modes: its content, the bands asked for, and what solves them.

    The versions of the numerical libraries belong to it, so that a stored answer is bit for bit
    what solving again would give.
    """
    bands = body.bands
    fast = importlib.util.find_spec("rslab") is not None
    return content_key(
        (SOLVER, np.__version__, scipy.__version__, fast),
        body.key,
        (float(bands.heard_hz), float(solved_hz), int(bands.most)),
        tuple((float(hertz), float(eta)) for hertz, eta in body.loss),
    )


def load_modes(store: ModeStore, key: str) -> ModeSet | None:
    """Fetch modes that were kept under ``key`` (see ``modes_key``)."""
    entry = store.load("modes", key)
    if entry is None:
        return None
    try:
        rates = entry.arrays["decay"]
        return ModeSet(
            omega=entry.arrays["omega"],
            shape=entry.arrays["shape"],
            rigid=entry.arrays["rigid"],
            residual=entry.arrays["residual"],
            decay=Decay(**{cause: rates[number] for number, cause in enumerate(CAUSES)}),
            warnings=tuple(entry.facts["warnings"]),
            **{name: entry.facts[name] for name in FACTS},
        )
    except (KeyError, IndexError, TypeError):
        return None  # a sound entry of another layout


def save_modes(store: ModeStore, key: str, modes: ModeSet) -> str:
    """Keep modes under ``key``; the answer is empty or a warning."""
    arrays = {name: getattr(modes, name) for name in ("omega", "shape", "rigid", "residual")}
    arrays["decay"] = np.stack([getattr(modes.decay, cause) for cause in CAUSES])
    facts = {name: getattr(modes, name) for name in FACTS}
    return store.save("modes", key, arrays, facts={**facts, "warnings": list(modes.warnings)})
