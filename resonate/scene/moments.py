"""Times of a scene: seconds, frames or timecode, exact."""

from __future__ import annotations

import re
from dataclasses import dataclass
from fractions import Fraction
from typing import Final

from resonate.scene.clock import FrameRate, frame_of
from resonate.scene.refused import RefusedError, shown
from resonate.scene.units import exact_quantity

_FRAMES: Final = re.compile(r"([+-]?\d{1,9}(?:\.\d{1,9})?)\s*f")
_TIMECODE: Final = re.compile(r"\d{1,2}:\d{2}:\d{2}[:;]\d{2}")


@dataclass(frozen=True, slots=True)
class Picture:
    """What frames and timecode are counted with; None where the picture itself is faulty."""

    rate: FrameRate
    start_frame: int
    numbered: bool


def read_moment(value: object, picture: Picture | None) -> Fraction:
    """Read a time as exact seconds after ``start``.

    ``0.5`` and ``"20 ms"`` count from ``start``; ``"1042 f"`` is that frame when ``start`` is a frame
    number, else frames after ``start``; ``"01:00:02:12"`` is that label when ``start`` is a timecode.
    """
    if isinstance(value, str):
        text = value.strip()
        if found := _FRAMES.fullmatch(text):
            if picture is None:
                return Fraction(0)
            first = picture.start_frame if picture.numbered else 0
            return (Fraction(found.group(1)) - first) / picture.rate.fraction
        if _TIMECODE.fullmatch(text):
            return _label_time(text, picture)
    return exact_quantity(value, "time")


def _label_time(text: str, picture: Picture | None) -> Fraction:
    if picture is None:
        return Fraction(0)
    if picture.numbered:
        raise RefusedError(
            f"{shown(text)} is a timecode, but the picture starts at frame {picture.start_frame}",
            f'give a frame such as "{picture.start_frame + 24} f", or seconds after the start',
        )
    day = picture.rate.day_frames
    frames = frame_of(text, picture.rate) - picture.start_frame
    if frames < -day // 2:  # past midnight
        frames += day
    elif frames > day // 2:  # before midnight, in handles
        frames -= day
    return frames / picture.rate.fraction


def read_span(value: object, rate: FrameRate | None) -> Fraction:
    """Read a duration as exact seconds: a time, a count of frames, or a timecode counted from zero.

    >>> read_span("72 f", FrameRate.read("24000/1001"))
    Fraction(3003, 1000)
    """
    if isinstance(value, str):
        text = value.strip()
        if found := _FRAMES.fullmatch(text):
            return Fraction(found.group(1)) / (rate.fraction if rate else 24)
        if _TIMECODE.fullmatch(text):
            return frame_of(text, rate) / rate.fraction if rate else Fraction(1)
    return exact_quantity(value, "time")
