r"""Writes the curves and the events as tables that any program reads.

Both files are comma-separated UTF-8 with one header line, ``\n`` line ends and ``.`` decimals. Times are
file time: 0 is frame 0 and sample 0. Metres and Y up, unless the scene asks for centimetres or Z up:
then positions, turns and displacements of these tables (and of no other file) are converted, and
column names end in ``_cm`` instead of ``_m``. Z up maps (x, y, z) to (x, -z, y), for the world and for the
axes of every body alike, as importers of glTF into Z-up programs do.
"""

from __future__ import annotations

import csv
from fractions import Fraction
from typing import TYPE_CHECKING, Final

import numpy as np

if TYPE_CHECKING:
    from pathlib import Path

    from numpy.typing import NDArray

    from resonate.motion.channels import BodyCurves, Curves
    from resonate.run.record import Event, Record
    from resonate.scene.clock import Clock
    from resonate.scene.model import PictureSpec, Scene

    Array = NDArray[np.float64]

_PER_METRE: Final = {"m": 1.0, "cm": 100.0}


def event_columns(unit: str) -> tuple[str, ...]:
    """Names of the columns of the event table for a unit of length."""
    return (
        "event",
        "kind",
        "body",
        "other",
        "begin_s",
        "end_s",
        "begin_sample",
        "begin_frame",
        f"x_{unit}",
        f"y_{unit}",
        f"z_{unit}",
        "impulse_Ns",
        "peak_N",
        "closing_speed_m_s",
        "leaving_speed_m_s",
    )


def body_columns(body: BodyCurves, unit: str) -> tuple[str, ...]:
    """Names of the columns of one body: place of its mass centre, turn, shown shapes, the rest.

    ``exaggeration`` says how many times the vibration in ``mode_K`` is enlarged: 1 is true size.
    """
    parts = (
        *(f"{axis}_{unit}" for axis in "xyz"),
        *("qx", "qy", "qz", "qw"),
        *body.labels,
        f"unresolved_{unit}",
        "force_peak_N",
        "exaggeration",
    )
    return tuple(f"{body.name}.{part}" for part in parts)


def write_curves(path: Path, curves: Curves, scene: Scene) -> None:
    """Write one row a frame: frame, timecode, seconds, then the columns of every body.

    Parameters
    ----------
    path : Path
        Where to write.
    curves : Curves
        Motion at the frames, SI, Y up.
    scene : Scene
        Clock, and the axes and unit of the picture.
    """
    picture, clock = scene.picture, scene.clock
    columns = ["frame", "timecode", "seconds"]
    parts: list[Array] = []
    for body in curves.bodies:
        columns.extend(body_columns(body, picture.unit))
        parts.append(_body_values(body, picture))
    # Adding zero turns -0.0 into 0.0.
    values = np.concatenate(parts, axis=1) + 0.0
    template = ",%.9g" * values.shape[1] + "\n"
    with path.open("w", encoding="utf-8", newline="") as file:
        csv.writer(file, lineterminator="\n").writerow(columns)
        for frame, row in enumerate(values):
            seconds = float(frame / clock.frame.fraction)
            file.write(f"{clock.label(frame)},{clock.timecode(frame)},{seconds!r}{template % tuple(row)}")


def _body_values(body: BodyCurves, picture: PictureSpec) -> Array:
    per_metre = _PER_METRE[picture.unit]
    frames = len(body.place_m)
    return np.concatenate(
        [
            turned(body.place_m, picture.up) * per_metre,
            turned(body.turn[:, :3], picture.up),
            body.turn[:, 3:],
            body.amplitude_m * per_metre,
            body.unresolved_m[:, None] * per_metre,
            body.force_peak_n[:, None],
            np.full((frames, 1), body.gain if body.exaggerated else 1.0),
        ],
        axis=1,
    )


def turned(vectors: Array, up: str) -> Array:
    """Vectors (n, 3), or vector parts of quaternions, from Y up to the axes asked for."""
    if up == "y":
        return vectors
    return np.stack([vectors[:, 0], -vectors[:, 2], vectors[:, 1]], axis=1)


def write_events(path: Path, record: Record, scene: Scene) -> None:
    """Write one row a contact, in the order of the record.

    ``begin_sample`` and ``begin_frame`` keep their fractions; the frame is counted as in the curves.
    """
    unit, up = scene.picture.unit, scene.picture.up
    with path.open("w", encoding="utf-8", newline="") as file:
        rows = csv.writer(file, lineterminator="\n")
        rows.writerow(event_columns(unit))
        for number, event in enumerate(record.events, start=1):
            begin, end = file_time(event.begin_s, scene.clock), file_time(event.end_s, scene.clock)
            place = turned(np.asarray(event.place_m, dtype=np.float64)[None, :], up)[0] * _PER_METRE[unit]
            numbers = (
                *place,
                event.impulse_ns,
                event.peak_n,
                event.closing_speed_m_s,
                event.leaving_speed_m_s,
            )
            rows.writerow(
                [
                    number,
                    event.kind,
                    event.body,
                    event.other,
                    repr(float(begin)),
                    repr(float(end)),
                    decimal(begin * scene.clock.sample_rate, digits=3),
                    decimal(scene.clock.label(0) + begin * scene.clock.frame.fraction, digits=9),
                    *("%.9g" % (value + 0.0) for value in numbers),
                ]
            )


def file_time(scene_s: float, clock: Clock) -> Fraction:
    """Exact file time of a scene time: seconds after frame 0 and sample 0."""
    return Fraction(scene_s) - clock.begin


def event_sample(event: Event, clock: Clock) -> int | None:
    """Nearest sample to the begin of a contact, or None where the file has none."""
    sample = round(file_time(event.begin_s, clock) * clock.sample_rate)
    return sample if 0 <= sample < clock.sample_count else None


def decimal(value: Fraction, *, digits: int) -> str:
    """Spell an exact number with a fixed number of decimals, rounded half to even.

    >>> decimal(Fraction(-1, 3), digits=3), decimal(Fraction(2002), digits=3)
    ('-0.333', '2002.000')
    """
    scaled = round(value * 10**digits)
    sign = "-" if scaled < 0 else ""
    whole, rest = divmod(abs(scaled), 10**digits)
    return f"{sign}{whole}.{rest:0{digits}d}"
