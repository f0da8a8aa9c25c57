"""One exact rational clock: frames, samples and timecode of a take.

Scene time 0 is the frame called ``start``; frame 0 is the first delivered frame, handles
included, and falls on sample 0. Labels follow SMPTE ST 12-1.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from fractions import Fraction
from typing import Final

from resonate.scene.refused import RefusedError, shown

#: The run starts this long before frame 0, so that filters and shutters have their past.
LEAD: Final = Fraction(20, 1000)

_NTSC: Final = 1001
_RATES: Final = (
    Fraction(24000, _NTSC),
    Fraction(24),
    Fraction(25),
    Fraction(30000, _NTSC),
    Fraction(30),
    Fraction(48),
    Fraction(50),
    Fraction(60000, _NTSC),
    Fraction(60),
)
# Common practice: these decimals stand for the exact fractions.
_ROUNDED: Final = {
    Fraction("23.976"): _RATES[0],
    Fraction("23.98"): _RATES[0],
    Fraction("29.97"): _RATES[3],
    Fraction("59.94"): _RATES[7],
}
_ALLOWED: Final = (
    '24, 25, 30, 48, 50, 60, "24000/1001", "30000/1001", "30000/1001 drop", "60000/1001", "60000/1001 drop"'
)
_LABEL: Final = re.compile(r"(\d{2}):(\d{2}):(\d{2})([:;])(\d{2})")


@dataclass(frozen=True, slots=True)
class FrameRate:
    """Frames a second as an exact fraction, and whether labels drop numbers.

    >>> FrameRate.read("30000/1001 drop")
    FrameRate(fraction=Fraction(30000, 1001), drop=True)
    """

    fraction: Fraction
    drop: bool = False

    def __post_init__(self) -> None:
        """Refuse rates that are not delivered anywhere."""
        if self.fraction not in _RATES:
            raise RefusedError(f"{self.fraction} is not a frame rate", f"use one of {_ALLOWED}")
        if self.drop and (self.fraction.denominator == 1 or self.nominal % 30):
            raise RefusedError(
                f"{self.fraction} frames a second has no drop-frame labels",
                'drop belongs to "30000/1001 drop" and "60000/1001 drop"; leave it out',
            )

    @property
    def nominal(self) -> int:
        """Whole number of labels a second: 30 for 30000/1001."""
        return math.ceil(self.fraction)

    @property
    def hz(self) -> float:
        """The rate as a float, 1/s."""
        return float(self.fraction)

    @property
    def day_frames(self) -> int:
        """Labels in 24 hours."""
        return self.nominal * 86400 - (self.dropped * (24 * 60 - 24 * 6) if self.drop else 0)

    @property
    def dropped(self) -> int:
        """Labels skipped in a minute: 2 at 30, 4 at 60, 0 without drop."""
        return self.nominal // 15 if self.drop else 0

    @classmethod
    def read(cls, value: object) -> FrameRate:
        """Read ``24``, ``"24000/1001"``, ``"30000/1001 drop"``, ``29.97`` or ``"29.97 drop"``.

        Raises
        ------
        RefusedError
            If it is none of the supported rates.
        """
        refusal = RefusedError(f"{shown(value)} is not a frame rate", f"use one of {_ALLOWED}")
        if isinstance(value, FrameRate):
            return value
        if isinstance(value, bool) or not isinstance(value, int | float | str):
            raise refusal
        text = str(value).strip()
        found = re.fullmatch(r"(\d{1,6}(?:\.\d{1,6})?|\d{1,6}/\d{1,6})(?:\s*fps)?(\s+drop)?", text)
        if found is None or found.group(1).endswith("/0"):
            raise refusal
        rate = Fraction(found.group(1)) if not re.search("/0+$", found.group(1)) else Fraction(0)
        rate = _ROUNDED.get(rate, rate)
        if rate not in _RATES:
            raise refusal
        return cls(rate, drop=found.group(2) is not None)

    def __str__(self) -> str:
        """Spell it as a scene does."""
        return f"{self.fraction}{' drop' if self.drop else ''}"


def frame_of(label: str, rate: FrameRate) -> int:
    """Count the frames from midnight to a timecode label.

    Raises
    ------
    RefusedError
        If it is not a label, or one that drop-frame counting skips.

    References
    ----------
    SMPTE ST 12-1, time and control code: labels and drop-frame compensation.

    Examples
    --------
    >>> frame_of("00:01:00;02", FrameRate.read("30000/1001 drop"))
    1800
    """
    found = _LABEL.fullmatch(label.strip())
    if found is None:
        raise RefusedError(
            f"{shown(label)} is not a timecode", 'write hours:minutes:seconds:frames, "01:00:00:00"'
        )
    hours, minutes, seconds, frames = (int(found.group(place)) for place in (1, 2, 3, 5))
    if found.group(4) == ";" and not rate.drop:
        raise RefusedError(
            f"{shown(label)} is a drop-frame label, but the rate {rate} does not drop",
            'write ":" before the frames, or ask for a rate such as "30000/1001 drop"',
        )
    if hours > 23 or minutes > 59 or seconds > 59 or frames >= rate.nominal:  # noqa: PLR2004 (a clock face)
        raise RefusedError(
            f"{shown(label)} is outside 23:59:59:{rate.nominal - 1:02d}",
            f"hours to 23, minutes and seconds to 59, frames to {rate.nominal - 1}",
        )
    if rate.drop and seconds == 0 and minutes % 10 and frames < rate.dropped:
        raise RefusedError(
            f"{shown(label)} does not exist: drop-frame counting skips it",
            f"use {hours:02d}:{minutes:02d}:00;{rate.dropped:02d}, the first label of that minute",
        )
    total_minutes = 60 * hours + minutes
    skipped = rate.dropped * (total_minutes - total_minutes // 10)
    return (60 * total_minutes + seconds) * rate.nominal + frames - skipped


def label_of(frame: int, rate: FrameRate) -> str:
    """Write the timecode label of a frame counted from midnight; it wraps after 24 hours.

    >>> label_of(17982, FrameRate.read("30000/1001 drop"))
    '00:10:00;00'
    """
    frame %= rate.day_frames
    if rate.drop:
        ten = 600 * rate.nominal - 9 * rate.dropped
        one = 60 * rate.nominal - rate.dropped
        tens, rest = divmod(frame, ten)
        frame += 9 * rate.dropped * tens
        if rest >= 60 * rate.nominal:
            frame += rate.dropped * ((rest - 60 * rate.nominal) // one + 1)
    seconds, frames = divmod(frame, rate.nominal)
    mark = ";" if rate.drop else ":"
    return f"{seconds // 3600:02d}:{seconds // 60 % 60:02d}:{seconds % 60:02d}{mark}{frames:02d}"


@dataclass(frozen=True, slots=True)
class Clock:
    """Exact times of the frames and samples of a take.

    Parameters
    ----------
    frame : FrameRate
        Frame rate.
    sample_rate : int
        Samples a second.
    start_frame : int
        The frame called ``start``: counted from midnight for a timecode, the number itself otherwise.
    numbered : bool
        Whether ``start`` was a frame number.
    handles : int
        Extra frames before ``start`` and after the end.
    length : Fraction
        Seconds from ``start`` to the end, without handles.
    """

    frame: FrameRate
    sample_rate: int
    start_frame: int
    numbered: bool
    handles: int
    length: Fraction

    @property
    def first_frame(self) -> int:
        """The number of delivered frame 0, counted as ``start_frame`` is; below 0 with handles before midnight."""
        return self.start_frame - self.handles

    @property
    def frame_count(self) -> int:
        """Delivered frames: handles, the frames of the length (a part counts whole), handles."""
        return 2 * self.handles + math.ceil(self.length * self.frame.fraction)

    @property
    def begins_the_day_before(self) -> bool:
        """Whether handles reach back across midnight."""
        return self.first_frame < 0

    @property
    def begin(self) -> Fraction:
        """Scene time of frame 0 and sample 0, s."""
        return -self.handles / self.frame.fraction

    @property
    def end(self) -> Fraction:
        """Scene time at which the last delivered frame ends, s."""
        return self.frame_time(self.frame_count)

    @property
    def begin_s(self) -> float:
        """``begin`` as a float, s."""
        return float(self.begin)

    @property
    def end_s(self) -> float:
        """``end`` as a float, s."""
        return float(self.end)

    @property
    def run_begin_s(self) -> float:
        """Scene time at which the run begins, 20 ms before frame 0, s."""
        return float(self.begin - LEAD)

    @property
    def sample_count(self) -> int:
        """Samples from frame 0 to the end."""
        return math.ceil((self.end - self.begin) * self.sample_rate)

    def frame_time(self, frame: int) -> Fraction:
        """Scene time of delivered frame ``frame``, s."""
        return (frame - self.handles) / self.frame.fraction

    def sample_time(self, sample: int) -> Fraction:
        """Scene time of sample ``sample``, s."""
        return self.begin + Fraction(sample, self.sample_rate)

    @property
    def time_reference(self) -> int:
        """Samples from midnight to sample 0, rounded to the nearest (EBU Tech 3285, TimeReference)."""
        return math.floor(self._reference + Fraction(1, 2))

    @property
    def time_reference_rest(self) -> Fraction:
        """What rounding took from ``time_reference``, as a fraction of a sample."""
        return self._reference - self.time_reference

    @property
    def _reference(self) -> Fraction:
        # Labels wrap at midnight, and so does the count of samples since then.
        first = self.first_frame if self.numbered else self.first_frame % self.frame.day_frames
        return first / self.frame.fraction * self.sample_rate

    def label(self, frame: int) -> int:
        """Return the number shown for a delivered frame: its own, or the count from 0 with timecode."""
        return self.first_frame + frame if self.numbered else frame

    def timecode(self, frame: int) -> str:
        """Timecode of delivered frame ``frame``, counted from midnight."""
        return label_of(self.first_frame + frame, self.frame)


def read_start(value: object, rate: FrameRate) -> tuple[int, bool]:
    """Read ``start`` as (frame, numbered): a timecode label or a frame number.

    >>> read_start("01:00:00:00", FrameRate.read(24)), read_start(1001, FrameRate.read(24))
    ((86400, False), (1001, True))
    """
    if isinstance(value, int) and not isinstance(value, bool):
        if not 0 <= value <= 10**9:
            raise RefusedError(f"{value} is not a frame number", "use a whole number from 0 to 1000000000")
        return value, True
    if isinstance(value, str):
        if re.fullmatch(r"\d{1,9}(\s*f)?", value.strip()):
            return int(value.strip().rstrip("f ")), True
        return frame_of(value, rate), False
    raise RefusedError(
        f"{shown(value)} is not a start", 'give a timecode such as "01:00:00:00" or a frame number'
    )
