"""Measures the tables and the motion file of a take."""

from __future__ import annotations

import re
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from resonate.take.readback import GlbFacts, Table, UnreadableError, read_glb, read_table
from resonate.take.report import Finding, equal, within

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    Json = dict[str, Any]  # a JSON object holds any JSON value

_AGAIN: Final = "the file was changed or damaged; make the take again with --replace"
_DEFECT: Final = "make the take again with --replace; if it stays, report it with the scene"
# Nine digits and the half of the last one, on either side.
_DIGITS: Final = 1e-8
_SAMPLE_DIGITS: Final = 1e-3


@dataclass(frozen=True, slots=True)
class Frames:
    """The clock of a take as its manifest states it, counted here once more."""

    rate: Fraction
    drop: bool
    frames: int
    handles: int
    start: int
    numbered: bool
    sample_rate: int

    @classmethod
    def of(cls, manifest: Json) -> Frames:
        """Read it from the manifest."""
        clock = manifest["clock"]
        return cls(
            rate=Fraction(clock["frame_rate"]),
            drop=bool(clock["drop_frame"]),
            frames=int(clock["frames"]),
            handles=int(clock["handles"]),
            start=int(clock["start_frame"]),
            numbered=bool(clock["start_is_number"]),
            sample_rate=int(clock["sample_rate_hz"]),
        )

    @property
    def first(self) -> int:
        """Number of frame 0, counted from midnight or as the scene numbers frames."""
        return self.start - self.handles

    @property
    def samples(self) -> int:
        """Samples that cover all frames."""
        return -(-self.frames * self.sample_rate * self.rate.denominator // self.rate.numerator)

    @property
    def reference(self) -> Fraction:
        """Exact samples from midnight to sample 0; handles may reach back into the day before."""
        first = self.first if self.numbered else self.first % self.day
        return Fraction(first * self.sample_rate) / self.rate

    def frame_of(self, label: str) -> int:
        """Frames from midnight to a timecode label (SMPTE ST 12-1), the inverse of what the writer does."""
        found = re.fullmatch(r"(\d\d):(\d\d):(\d\d)([:;])(\d\d)", label)
        if found is None or (found.group(4) == ";") != self.drop:
            raise UnreadableError(f"{label!r} is not a timecode of this take")
        hours, minutes, seconds, frames = (int(found.group(n)) for n in (1, 2, 3, 5))
        nominal = round(self.rate)
        left_out = nominal // 15 if self.drop else 0
        if self.drop and minutes % 10 and seconds == 0 and frames < left_out:
            raise UnreadableError(f"{label!r} is skipped in drop-frame counting")
        minutes += 60 * hours
        return (60 * minutes + seconds) * nominal + frames - left_out * (minutes - minutes // 10)

    @property
    def day(self) -> int:
        """Frame labels in a day."""
        nominal = round(self.rate)
        return 86400 * nominal - (1296 * (nominal // 15) if self.drop else 0)


def event_findings(file: Path, manifest: Json) -> Iterator[Finding]:
    """Rows, and that seconds, samples and frames of each row are one moment."""
    table, clock = read_table(file), Frames.of(manifest)
    yield equal("events", table.rows, manifest["events"], where=file.name, fix=_AGAIN)
    begin, end = table.numbers("begin_s"), table.numbers("end_s")
    samples, frames = table.numbers("begin_sample"), table.numbers("begin_frame")
    first = clock.first if clock.numbered else 0
    yield within(
        "event samples against event seconds",
        _largest(samples - begin * clock.sample_rate),
        _SAMPLE_DIGITS,
        unit="samples",
        where=file.name,
        fix=_AGAIN,
    )
    yield within(
        "event frames against event seconds",
        _largest((frames - first) / float(clock.rate) - begin) * clock.sample_rate,
        _SAMPLE_DIGITS,
        unit="samples",
        where=file.name,
        fix=_AGAIN,
    )
    early = int(np.sum(end < begin)) + int(np.sum(np.diff(begin) < 0.0))
    yield equal("events out of order, or ending before they begin", early, 0, where=file.name, fix=_DEFECT)


def curve_findings(file: Path, manifest: Json) -> Iterator[Finding]:
    """Rows, times, labels, and that turns are unit quaternions in one hemisphere."""
    table, clock = read_table(file), Frames.of(manifest)
    where = file.name
    yield equal("frames", table.rows, clock.frames, where=where, fix=_AGAIN)
    count = np.arange(table.rows)
    exact = np.array([float(Fraction(int(k)) / clock.rate) for k in count])
    seconds = table.numbers("seconds")
    late = _largest(seconds - exact) * clock.sample_rate
    yield within("frame times against the frame rate", late, 1e-6, unit="samples", where=where, fix=_AGAIN)
    first = clock.first if clock.numbered else 0
    wrong = int(np.sum(table.numbers("frame") != first + count))
    yield equal("frames with a wrong number", wrong, 0, where=where, fix=_AGAIN)
    labels = np.array([clock.frame_of(label) for label in table.columns["timecode"]])
    wrong = int(np.sum(labels != (clock.first + count) % clock.day))
    yield equal("frames with a wrong timecode", wrong, 0, where=where, fix=_AGAIN)
    for body in manifest["bodies"]:
        turn = _columns(table, body["name"], ("qx", "qy", "qz", "qw"))
        size = _largest(np.linalg.norm(turn, axis=1) - 1.0)
        yield within(f"turns of {body['name']}, length", size, _DIGITS, unit="", where=where, fix=_AGAIN)
        flips = int(np.sum(np.sum(turn[1:] * turn[:-1], axis=1) < 0.0))
        yield equal(f"turns of {body['name']}, changes of sign", flips, 0, where=where, fix=_DEFECT)


def glb_findings(file: Path, manifest: Json) -> Iterator[Finding]:
    """Keys on every frame and at every contact; the same motion as in the curves."""
    motion, clock = read_glb(file), Frames.of(manifest)
    channel = motion.channel(0, "translation")
    if channel is None:
        raise UnreadableError("the first body has no translation curve")
    keys = channel[0]
    exact = np.array([float(k / clock.rate) for k in map(Fraction, range(clock.frames))])
    yield _keys_finding("frames without a key", exact, keys, file.name)
    events_file = file.with_name(file.name.removesuffix(".glb") + ".events.csv")
    if events_file.is_file():
        begin = read_table(events_file).numbers("begin_s")
        inside = begin[(begin >= 0.0) & (begin < float(clock.frames / clock.rate))]
        yield _keys_finding("contacts without a key", inside, keys, file.name)
    curves_file = file.with_name(file.name.removesuffix(".glb") + ".curves.csv")
    if curves_file.is_file():
        yield from _same_motion(motion, read_table(curves_file), exact, manifest, where=file.name)


def _keys_finding(name: str, times_s: Array, keys_s: Array, where: str) -> Finding:
    # A key is at its time when it is the single-precision number next to it; two contacts closer than
    # that share one.
    step = np.spacing(times_s.astype(np.float32)).astype(np.float64)
    place = np.clip(np.searchsorted(keys_s, times_s), 1, max(len(keys_s) - 1, 1))
    nearest = np.minimum(np.abs(keys_s[place - 1] - times_s), np.abs(keys_s[place % len(keys_s)] - times_s))
    return equal(name, int(np.sum(nearest > step)), 0, where=where, fix=_DEFECT)


def _same_motion(
    motion: GlbFacts, table: Table, frames_s: Array, manifest: Json, *, where: str
) -> Iterator[Finding]:
    axes = manifest["tables"]
    unit = axes["unit"]
    for number, body in enumerate(manifest["bodies"]):
        name = body["name"]
        place = motion.channel(number, "translation")
        turn = motion.channel(number, "rotation")
        if place is None or turn is None:
            raise UnreadableError(f"body {name!r} does not move")
        at = np.searchsorted(place[0], frames_s.astype(np.float32).astype(np.float64))
        shown_m = (
            _columns(table, name, tuple(f"{axis}_{unit}" for axis in "xyz")) / {"m": 1.0, "cm": 100.0}[unit]
        )
        quaternion = _columns(table, name, ("qx", "qy", "qz", "qw"))
        if axes["up"] == "z":
            # (x, y, z) of the tables is (x, z, -y) with Y up.
            shown_m = np.column_stack([shown_m[:, 0], shown_m[:, 2], -shown_m[:, 1]])
            quaternion = np.column_stack([quaternion[:, [0, 2]], -quaternion[:, 1], quaternion[:, 3]])
        size = float(np.max(np.abs(shown_m), initial=1.0))
        apart = _largest(place[1][at] - shown_m) / size
        yield within(f"place of {name} against the curves", apart, 1e-6, unit="", where=where, fix=_AGAIN)
        apart = _largest(turn[1][at] - quaternion)
        yield within(f"turn of {name} against the curves", apart, 1e-6, unit="", where=where, fix=_AGAIN)


def _columns(table: Table, body: str, names: tuple[str, ...]) -> Array:
    return np.stack([table.numbers(f"{body}.{name}") for name in names], axis=1)


def _largest(values: Array) -> float:
    return float(np.max(np.abs(values), initial=0.0))
