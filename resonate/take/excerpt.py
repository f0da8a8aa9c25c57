"""Short pieces of the pressure as the run made it: kept in the manifest, so that the written sound can be laid beside.

They are taken before level, dither and rounding, and never from the file: a sound that was moved, edited or written
to the wrong place no longer fits them.
"""

from __future__ import annotations

import base64
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    Array = NDArray[np.float64]

# Each begins a little before its sound arrives and holds the blow.
_LEAD_S: Final = 1.5e-3
_LENGTH_S: Final = 10e-3
# At most so many contacts a channel, spread over all of them.
_MOST: Final = 12
_LARGEST: Final = 32767  # of a 16-bit number


@dataclass(frozen=True, slots=True)
class Excerpt:
    """One piece of one channel.

    ``sample``: where it begins in the file; ``unit_pa`` times the 16-bit numbers (little-endian, base64) in ``codes``
    is its pressure, Pa.
    """

    channel: str
    sample: int
    unit_pa: float
    codes: str


def excerpts_of(
    pressure_pa: Array, arrivals_s: Array, *, rate_hz: int, channels: Sequence[str]
) -> tuple[Excerpt, ...]:
    """Cut pieces at arrivals of contacts and at the loudest place of every channel.

    Parameters
    ----------
    pressure_pa : Array
        (n, c) as rendered.
    arrivals_s : Array
        (k, c) file time at which each contact reaches each channel, s.
    rate_hz : int
        Samples a second.
    channels : Sequence[str]
        Names (c,).

    Returns
    -------
    tuple[Excerpt, ...]
        In order of channels and of time; none of a channel that is silent throughout.
    """
    length = min(len(pressure_pa), max(1, round(_LENGTH_S * rate_hz)))
    found: list[Excerpt] = []
    for column, name in enumerate(channels):
        wave = pressure_pa[:, column]
        if not np.any(wave):
            continue
        begins = np.rint((arrivals_s[:, column] - _LEAD_S) * rate_hz)
        begins = np.append(_spread(begins[(begins > -length) & (begins < len(wave))]), np.argmax(np.abs(wave)))
        last = -length
        for begin in np.unique(np.clip(begins, 0, len(wave) - length).astype(int)).tolist():
            part = wave[begin : begin + length]
            if begin - last >= length and np.any(part):
                found.append(_excerpt(name, begin, part))
                last = begin
    return tuple(found)


def _spread(begins: Array) -> Array:
    if len(begins) <= _MOST:
        return begins
    return np.asarray(np.sort(begins)[np.linspace(0, len(begins) - 1, _MOST).astype(int)])


def _excerpt(channel: str, begin: int, part: Array) -> Excerpt:
    unit_pa = float(np.max(np.abs(part))) / _LARGEST
    codes = np.rint(part / unit_pa).astype("<i2") if unit_pa > 0.0 else np.zeros(len(part), "<i2")
    return Excerpt(channel, begin, unit_pa, base64.b64encode(codes.tobytes()).decode("ascii"))
