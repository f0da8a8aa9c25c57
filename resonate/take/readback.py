"""Readers for the check, made apart from the writers: they share no code and no constants with them."""

from __future__ import annotations

import csv
import json
import struct
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Final

import numpy as np

if TYPE_CHECKING:
    from pathlib import Path

    from numpy.typing import NDArray

    Array = NDArray[np.float64]

_SIZE_IN_DS64: Final = 0xFFFFFFFF
_COUNTS: Final = {"SCALAR": 1, "VEC3": 3, "VEC4": 4}
_KINDS: Final = {5121: "<u1", 5123: "<u2", 5125: "<u4", 5126: "<f4"}


class UnreadableError(Exception):
    """A file is not what its name says; the text says why."""


@dataclass(frozen=True, slots=True)
class WaveFacts:
    """What the chunks around the samples say.

    ``cues`` are (sample, label) in the order of the file.
    """

    time_reference: int
    bext_version: int
    description: str
    data_bytes: int
    cues: tuple[tuple[int, str], ...]


def read_wave_chunks(path: Path) -> WaveFacts:
    """Walk the chunks of a RIFF or RF64 file without reading its samples.

    Raises
    ------
    UnreadableError
        If the file is not a Broadcast Wave, or its chunks run past its end.
    """
    chunks: dict[bytes, bytes] = {}
    data_bytes = -1
    with path.open("rb") as file:
        length = file.seek(0, 2)
        file.seek(0)
        kind, size, wave = struct.unpack("<4sI4s", _exactly(file.read(12), 12))
        if kind not in (b"RIFF", b"RF64") or wave != b"WAVE":
            raise UnreadableError("no RIFF or RF64 header")
        while file.tell() + 8 <= length:
            name, count = struct.unpack("<4sI", file.read(8))
            if name == b"data":
                data_bytes = count
                if kind == b"RF64" and count == _SIZE_IN_DS64:
                    data_bytes = struct.unpack_from("<Q", chunks.get(b"ds64", b"").ljust(16, b"\0"), 8)[0]
                file.seek(data_bytes + data_bytes % 2, 1)
            else:
                chunks[name] = _exactly(file.read(count), count)
                file.seek(count % 2, 1)
    if kind == b"RF64":
        size = struct.unpack_from("<Q", chunks.get(b"ds64", b"").ljust(8, b"\0"))[0]
    if size + 8 != length or data_bytes < 0:
        raise UnreadableError(f"the header speaks of {size + 8} bytes, the file has {length}")
    bext = chunks.get(b"bext", b"")
    if len(bext) < 602:  # noqa: PLR2004 (EBU Tech 3285, the fixed part)
        raise UnreadableError("no bext chunk of at least 602 bytes")
    low, high, version = struct.unpack_from("<IIH", bext, 338)
    return WaveFacts(
        time_reference=low + (high << 32),
        bext_version=version,
        description=bext[:256].split(b"\0")[0].decode("ascii", "replace"),
        data_bytes=data_bytes,
        cues=_cues(chunks.get(b"cue ", b""), chunks.get(b"LIST", b"")),
    )


def _exactly(data: bytes, count: int) -> bytes:
    if len(data) != count:
        raise UnreadableError("a chunk runs past the end of the file")
    return data


def _cues(points: bytes, notes: bytes) -> tuple[tuple[int, str], ...]:
    labels: dict[int, str] = {}
    place = 4
    while place + 12 <= len(notes):
        name, count, number = struct.unpack_from("<4sII", notes, place)
        if name == b"labl":
            labels[number] = notes[place + 12 : place + 8 + count].split(b"\0")[0].decode("ascii", "replace")
        place += 8 + count + count % 2
    found = [struct.unpack_from("<II4sIII", points, place) for place in range(4, len(points) - 23, 24)]
    return tuple((entry[5], labels.get(entry[0], "")) for entry in found)


@dataclass(frozen=True, slots=True)
class Table:
    """A comma-separated table: ``columns`` by name, as text."""

    columns: dict[str, list[str]]

    def numbers(self, name: str) -> Array:
        """Give a column as numbers.

        Raises
        ------
        UnreadableError
            If there is no such column or it holds something else.
        """
        if name not in self.columns:
            raise UnreadableError(f"no column {name!r}")
        try:
            return np.array([float(text) for text in self.columns[name]], dtype=np.float64)
        except ValueError as error:
            raise UnreadableError(f"column {name!r}: {error}") from error

    @property
    def rows(self) -> int:
        """Number of rows below the header."""
        return len(next(iter(self.columns.values()), []))


def read_table(path: Path) -> Table:
    """Read a table.

    Raises
    ------
    UnreadableError
        If rows are of different lengths.
    """
    with path.open(encoding="utf-8", newline="") as file:
        rows = list(csv.reader(file))
    if not rows or any(len(row) != len(rows[0]) for row in rows):
        raise UnreadableError("rows of different lengths, or none at all")
    return Table({name: [row[place] for row in rows[1:]] for place, name in enumerate(rows[0])})


@dataclass(frozen=True, slots=True)
class GlbFacts:
    """``document`` is the JSON of a binary glTF file, ``binary`` its buffer."""

    document: dict[str, Any]
    binary: bytes

    def numbers(self, accessor: int) -> Array:
        """Values (count, components) of an accessor as double precision."""
        entry = self.document["accessors"][accessor]
        view = self.document["bufferViews"][entry["bufferView"]]
        width = _COUNTS[entry["type"]]
        begin = view.get("byteOffset", 0) + entry.get("byteOffset", 0)
        flat = np.frombuffer(self.binary, _KINDS[entry["componentType"]], entry["count"] * width, begin)
        return flat.reshape(-1, width).astype(np.float64)

    def channel(self, node: int, path: str) -> tuple[Array, Array] | None:
        """Key times (n,), s, and values (n, components) of one animated channel, None if it has none."""
        animation = self.document["animations"][0]
        for channel in animation["channels"]:
            if channel["target"] == {"node": node, "path": path}:
                sampler = animation["samplers"][channel["sampler"]]
                return self.numbers(sampler["input"])[:, 0], self.numbers(sampler["output"])
        return None


def read_glb(path: Path) -> GlbFacts:
    """Read a binary glTF 2.0 file.

    Raises
    ------
    UnreadableError
        If it is not one.
    """
    data = path.read_bytes()
    if len(data) < 20 or data[:4] != b"glTF":  # noqa: PLR2004 (both headers)
        raise UnreadableError("no glTF header")
    _, version, length = struct.unpack_from("<4sII", data)
    count, kind = struct.unpack_from("<I4s", data, 12)
    if version != 2 or length != len(data) or kind != b"JSON":  # noqa: PLR2004 (glTF 2)
        raise UnreadableError("not a whole glTF 2.0 file")
    try:
        document = json.loads(data[20 : 20 + count])
    except ValueError as error:
        raise UnreadableError(f"its JSON does not read: {error}") from error
    return GlbFacts(document, data[28 + count :])
