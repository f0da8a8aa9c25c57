"""Writes Broadcast Wave files, and RF64 where four gibibytes are not enough.

The same input gives the same bytes: no dates but a fixed one, no peak chunk, no padding of unknown
content. References: EBU Tech 3285 (2011); EBU Tech 3306 (2009), RF64; ITU-R BS.2088 for the rule that
a ``JUNK`` chunk at the front leaves the place for ``ds64``.
"""

from __future__ import annotations

import math
import struct
from typing import TYPE_CHECKING, Final

import numpy as np

from resonate.errors import TakeError
from resonate.take.chunks import bext, chunk, cue_points, form, ixml
from resonate.take.quantise import BITS, encode, room

if TYPE_CHECKING:
    from pathlib import Path

    from numpy.typing import NDArray

    from resonate.take.chunks import Heading
    from resonate.take.quantise import Format

    Array = NDArray[np.float64]

#: The largest RIFF size: what a 32-bit count can say.
RIFF_LIMIT: Final = 2**32 - 1
_IN_DS64: Final = 0xFFFFFFFF
_BLOCK: Final = 65536


def write_wave(
    path: Path,
    samples: Array,
    *,
    rate_hz: int,
    sample_format: Format,
    heading: Heading,
    gain: float = 1.0,
    rng: np.random.Generator | None = None,
    riff_limit: int = RIFF_LIMIT,
) -> None:
    """Write samples as one Broadcast Wave file.

    Parameters
    ----------
    path : Path
        Where to write.
    samples : Array
        (n, channels), any unit; taken in blocks.
    rate_hz : int
        Samples a second.
    sample_format : Format
        ``16-bit``, ``24-bit`` or ``float``.
    heading : Heading
        Description, time reference, loudness, cues.
    gain : float
        What one unit of ``samples`` is as a share of full scale.
    rng : numpy.random.Generator, optional
        Source of triangular dither for the integer formats; None rounds without it.
    riff_limit : int
        Sizes above this make an RF64 file.

    Raises
    ------
    TakeError
        If samples are not finite, or an integer format would clip: with the gain that is needed.
    """
    _check_room(samples, gain, sample_format, rng=rng, where=str(path))
    count, channels = samples.shape
    head = form(sample_format, channels, rate_hz)
    if sample_format == "float":
        # Every format but integer PCM states its length a second time.
        head += chunk(b"fact", struct.pack("<I", min(count, _IN_DS64)))
    head += bext(heading, sample_format, channels, rate_hz)
    head += cue_points(heading.cues) + ixml(heading, sample_format, rate_hz)
    data_bytes = count * channels * BITS[sample_format] // 8
    riff_bytes = 4 + (8 + 28) + len(head) + 8 + data_bytes + data_bytes % 2
    long = riff_bytes > riff_limit
    with path.open("wb") as file:
        file.write(_opening(riff_bytes, data_bytes, count, long=long))
        file.write(head)
        file.write(b"data" + struct.pack("<I", _IN_DS64 if long else data_bytes))
        for begin in range(0, count, _BLOCK):
            block = np.asarray(samples[begin : begin + _BLOCK], dtype=np.float64) * gain
            file.write(encode(block, sample_format, rng=rng))
        file.write(b"\0" * (data_bytes % 2))


def _opening(riff_bytes: int, data_bytes: int, count: int, *, long: bool) -> bytes:
    if long:
        sizes = struct.pack("<QQQI", riff_bytes, data_bytes, count, 0)
        return b"RF64" + struct.pack("<I", _IN_DS64) + b"WAVE" + chunk(b"ds64", sizes)
    return b"RIFF" + struct.pack("<I", riff_bytes) + b"WAVE" + chunk(b"JUNK", bytes(28))


def _check_room(
    samples: Array, gain: float, sample_format: Format, *, rng: np.random.Generator | None, where: str
) -> None:
    peak = largest(samples) * abs(gain)
    if not math.isfinite(peak):
        raise TakeError(
            what="the sound holds values that are not finite numbers",
            where=where,
            fix="this is a defect of the run; report it with the scene",
        )
    most = room(sample_format, dither=rng is not None)
    if peak <= most:
        return
    over_db = 20.0 * math.log10(peak)
    # Rounded towards quiet, so that the advice is enough.
    lower_db = math.ceil(100.0 * 20.0 * math.log10(peak / most)) / 100.0
    raise TakeError(
        what=f"the sound peaks at {over_db:+.2f} dB of full scale and would clip as {sample_format}",
        where=where,
        fix=f"lower it by {lower_db:.2f} dB: multiply sound.full_scale by {10.0 ** (lower_db / 20.0):.4g}, "
        'give a level such as {peak = "-6 dB"}, or write format = "float"',
    )


def largest(samples: Array) -> float:
    """Largest magnitude of any sample, found in blocks; not finite if any sample is not."""
    peaks = [np.max(np.abs(samples[begin : begin + _BLOCK])) for begin in range(0, len(samples), _BLOCK)]
    return float(np.max(peaks, initial=0.0))
