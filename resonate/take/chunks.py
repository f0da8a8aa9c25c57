"""The chunks of a Broadcast Wave file, each as bytes.

References: EBU Tech 3285 (2011) for ``bext`` version 2 and its loudness fields; EBU R 98 (1999) for the
coding history; Microsoft & IBM, Multimedia Programming Interface and Data Specifications 1.0
(1991) for RIFF, ``cue`` and ``adtl``; the iXML specification for ``iXML`` (its names from memory).
"""

from __future__ import annotations

import math
import struct
import unicodedata
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final
from xml.sax.saxutils import escape

from resonate.take.quantise import BITS

if TYPE_CHECKING:
    from collections.abc import Sequence

    from resonate.take.quantise import Format

#: Stands in every file for the day it was made: the same scene must give the same bytes.
FIXED_DATE: Final = "2000-01-01"
FIXED_TIME: Final = "00:00:00"

_PCM, _IEEE_FLOAT, _EXTENSIBLE = 1, 3, 0xFFFE
# KSDATAFORMAT_SUBTYPE_*: the tag, then this tail.
_GUID_TAIL: Final = bytes.fromhex("000000001000800000aa00389b71")
_UNSET: Final = 0x7FFF
_MOST_PLAIN_CHANNELS: Final = 2


@dataclass(frozen=True, slots=True)
class Loudness:
    """Levels for the header, each None where it is not known.

    ``integrated_lufs``, ``momentary_lufs`` and ``short_term_lufs`` (the largest of each), LUFS;
    ``range_lu``, LU; ``true_peak_dbtp``, dB true peak.
    """

    integrated_lufs: float | None = None
    range_lu: float | None = None
    true_peak_dbtp: float | None = None
    momentary_lufs: float | None = None
    short_term_lufs: float | None = None


@dataclass(frozen=True, slots=True)
class Cue:
    """A marker: the sample it stands at and what it says."""

    sample: int
    label: str


@dataclass(frozen=True, slots=True)
class Slate:
    """Timecode and names for ``iXML``.

    ``frame_rate`` as a fraction (``24000/1001``); ``tracks`` the microphone names in channel order.
    """

    project: str
    take: str
    frame_rate: str
    drop: bool
    tracks: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Heading:
    """What a wave file says about itself.

    ``description`` at most 256 characters, ``reference`` 32; ``time_reference`` samples from midnight to the
    first sample. Text outside ASCII is spelt without accents, or with ``?``.
    """

    description: str
    reference: str
    time_reference: int
    loudness: Loudness = Loudness()
    cues: tuple[Cue, ...] = ()
    slate: Slate | None = None


def ascii_only(text: str) -> bytes:
    """Spell text in printable ASCII.

    >>> ascii_only("Kombüse ☂")
    b'Kombuse ?'
    """
    plain = "".join(c for c in unicodedata.normalize("NFKD", text) if not unicodedata.combining(c))
    return "".join(c if " " <= c <= "~" else "?" for c in plain).encode("ascii")


def chunk(name: bytes, payload: bytes) -> bytes:
    """One RIFF chunk, padded to an even length."""
    return name + struct.pack("<I", len(payload)) + payload + b"\0" * (len(payload) % 2)


def form(sample_format: Format, channels: int, rate_hz: int) -> bytes:
    """Make ``fmt``: the plain tags for one or two channels, EXTENSIBLE without speaker places above."""
    bits = BITS[sample_format]
    tag = _IEEE_FLOAT if sample_format == "float" else _PCM
    frame = channels * bits // 8
    plain = channels <= _MOST_PLAIN_CHANNELS
    payload = struct.pack(
        "<HHIIHH", tag if plain else _EXTENSIBLE, channels, rate_hz, rate_hz * frame, frame, bits
    )
    if not plain:
        payload += struct.pack("<HHI", 22, bits, 0) + struct.pack("<H", tag) + _GUID_TAIL
    elif tag == _IEEE_FLOAT:
        payload += struct.pack("<H", 0)
    return chunk(b"fmt ", payload)


def bext(heading: Heading, sample_format: Format, channels: int, rate_hz: int) -> bytes:
    """Make ``bext`` version 2: 602 bytes and the coding history."""
    level = heading.loudness
    fixed = struct.pack(
        "<256s32s32s10s8sQH64s5h180x",
        ascii_only(heading.description)[:256],
        b"resonate",
        ascii_only(heading.reference)[:32],
        FIXED_DATE.encode(),
        FIXED_TIME.encode(),
        heading.time_reference,
        2,
        b"",
        _hundredths(level.integrated_lufs),
        _hundredths(level.range_lu),
        _hundredths(level.true_peak_dbtp),
        _hundredths(level.momentary_lufs),
        _hundredths(level.short_term_lufs),
    )
    layout = {1: "mono", 2: "stereo"}.get(channels)
    history = f"A=PCM,F={rate_hz},W={BITS[sample_format]}{f',M={layout}' if layout else ''},T=resonate\r\n"
    return chunk(b"bext", fixed + history.encode("ascii"))


def _hundredths(level: float | None) -> int:
    # Tech 3285 section 2.4: hundredths, within +-99.99; everything else is "not set".
    if level is None or not math.isfinite(level) or abs(level) >= 99.995:  # noqa: PLR2004 (said above)
        return _UNSET
    return round(100.0 * level)


def cue_points(cues: Sequence[Cue]) -> bytes:
    """Make ``cue`` and ``LIST adtl``: nothing at all where there are no cues.

    Position and sample offset are the same sample, and labels are numbered from 1 in order.
    """
    if not cues:
        return b""
    points, labels = struct.pack("<I", len(cues)), b"adtl"
    for number, item in enumerate(cues, start=1):
        points += struct.pack("<II4sIII", number, item.sample, b"data", 0, 0, item.sample)
        labels += chunk(b"labl", struct.pack("<I", number) + ascii_only(item.label) + b"\0")
    return chunk(b"cue ", points) + chunk(b"LIST", labels)


def ixml(heading: Heading, sample_format: Format, rate_hz: int) -> bytes:
    """Make ``iXML``: frame rate, drop flag, time of the first sample and track names."""
    slate = heading.slate
    if slate is None:
        return b""
    high, low = divmod(heading.time_reference, 2**32)
    tracks = "".join(
        f"<TRACK><CHANNEL_INDEX>{number}</CHANNEL_INDEX><INTERLEAVE_INDEX>{number}</INTERLEAVE_INDEX>"
        f"<NAME>{escape(name)}</NAME></TRACK>"
        for number, name in enumerate(slate.tracks, start=1)
    )
    text = (
        '<?xml version="1.0" encoding="UTF-8"?>\n<BWFXML><IXML_VERSION>1.61</IXML_VERSION>'
        f"<PROJECT>{escape(slate.project)}</PROJECT><TAKE>{escape(slate.take)}</TAKE>"
        f"<SPEED><MASTER_SPEED>{slate.frame_rate}</MASTER_SPEED>"
        f"<CURRENT_SPEED>{slate.frame_rate}</CURRENT_SPEED>"
        f"<TIMECODE_RATE>{slate.frame_rate}</TIMECODE_RATE>"
        f"<TIMECODE_FLAG>{'DF' if slate.drop else 'NDF'}</TIMECODE_FLAG>"
        f"<FILE_SAMPLE_RATE>{rate_hz}</FILE_SAMPLE_RATE>"
        f"<AUDIO_BIT_DEPTH>{BITS[sample_format]}</AUDIO_BIT_DEPTH>"
        f"<DIGITIZER_SAMPLE_RATE>{rate_hz}</DIGITIZER_SAMPLE_RATE>"
        f"<TIMESTAMP_SAMPLES_SINCE_MIDNIGHT_HI>{high}</TIMESTAMP_SAMPLES_SINCE_MIDNIGHT_HI>"
        f"<TIMESTAMP_SAMPLES_SINCE_MIDNIGHT_LO>{low}</TIMESTAMP_SAMPLES_SINCE_MIDNIGHT_LO>"
        f"<TIMESTAMP_SAMPLE_RATE>{rate_hz}</TIMESTAMP_SAMPLE_RATE></SPEED>"
        f"<TRACK_LIST><TRACK_COUNT>{len(slate.tracks)}</TRACK_COUNT>{tracks}</TRACK_LIST></BWFXML>\n"
    )
    data = text.encode("utf-8")
    # A widely used reader of RF64 forgets the pad byte of chunks that it does not know.
    return chunk(b"iXML", data + b"\n" * (len(data) % 2))
