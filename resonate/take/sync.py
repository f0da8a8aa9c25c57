"""Where a waveform stands in time: against the same waveform made again, and by its onsets."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np

from resonate.errors import TakeError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

#: Phase is read up to this share of the sample rate; above it delivery filters end.
_BAND: Final = 0.4
# A rise of 12 dB is an onset beyond doubt; less may be a beat between modes.
_CLEAR: Final = 4.0
_ORDERS: Final = (0, 2, 4)
# The first peak of a blow comes within this time.
_BLOW_S: Final = 20e-3
# A piece is looked for this close first; this likeness needs no further search.
_NEAR: Final = 16
_SAME: Final = 0.999
_FINE: Final = 16


def sync_by_correlation(
    wave: Array, reference: Array, *, rate_hz: float, below_hz: float | None = None
) -> float:
    """Find by how many samples a waveform is late against its reference.

    The whole samples come from the largest cross-correlation, the rest from the slope of the
    phase of the cross spectrum, each frequency weighted by its power: exact for a pure shift, to a
    small part of a sample with noise.

    Parameters
    ----------
    wave : Array
        (n,) as read from a file, any level.
    reference : Array
        (k,) the same sound made by another way.
    rate_hz : float
        Samples a second of both.
    below_hz : float, optional
        Use frequencies up to here; 0.4 of the rate if not given.

    Returns
    -------
    float
        Samples; positive when ``wave`` comes later.

    Raises
    ------
    TakeError
        If one of them is silent.

    References
    ----------
    Knapp & Carter, The generalized correlation method for estimation of time delay, IEEE Trans. ASSP 24,
    320-327 (1976).
    """
    if not np.any(wave) or not np.any(reference):
        raise TakeError(what="silence has no place in time", where="sync", fix="pass a channel that sounds")
    size = 1 << int(np.ceil(np.log2(len(wave) + len(reference))))
    cross = np.fft.rfft(wave, size) * np.conj(np.fft.rfft(reference, size))
    turns = np.arange(len(cross)) / size
    used = turns * rate_hz <= (_BAND * rate_hz if below_hz is None else below_hz)
    correlation = np.fft.irfft(np.where(used, cross, 0.0), size)
    whole = int(np.argmax(correlation))
    whole = whole - size if whole > size // 2 else whole
    rest = cross[used] * np.exp(2j * np.pi * turns[used] * whole)
    # Least squares of phase = -2 pi turns * delay, weighted by power.
    weight = np.abs(rest)
    angle = 2.0 * np.pi * turns[used]
    return float(whole - np.sum(weight * angle * np.angle(rest)) / np.sum(weight * angle**2))


def onset_near(wave: Array, *, rate_hz: float, expected_s: float, reach_s: float) -> float | None:
    """Time of the onset nearest to where one is expected, None where the sound does not rise clearly.

    The largest peak within ``reach_s`` after the expected time is compared with what sounds before; the
    onset is where the sound first passes a twentieth of that peak and twice what was there. A blow on
    something that still rings brings back the high frequencies, which die first: second and fourth
    differences of the sound are looked at as well, and the one that rises most is believed.

    Parameters
    ----------
    wave : Array
        (n,) one channel.
    rate_hz : float
        Samples a second.
    expected_s : float
        Where the onset should be, s.
    reach_s : float
        How far before and after it may be looked for, s.

    Returns
    -------
    float or None
        Seconds, on the sample grid.
    """
    centre, reach = round(expected_s * rate_hz), round(reach_s * rate_hz)
    begin, end = max(0, centre - reach), min(len(wave), centre + reach)
    clearest, found = _CLEAR, None
    for order in _ORDERS:
        # Centred: sample n of the difference belongs to sample n of the wave.
        part = np.abs(np.diff(wave[max(0, begin - order // 2) : end + order // 2], order))
        quiet = np.abs(np.diff(wave[max(0, begin - reach) : begin], order))
        peak, floor = float(np.max(part, initial=0.0)), float(np.max(quiet, initial=0.0))
        rise = peak / floor if floor > 0.0 else np.inf
        if peak > 0.0 and rise > clearest:
            clearest = rise
            found = (begin + int(np.argmax(part > max(0.05 * peak, 2.0 * floor)))) / rate_hz
    return found


def first_sound(wave: Array, *, rate_hz: float, floor: float) -> float | None:
    """Time at which a channel begins to sound, s; None if it never does.

    Parameters
    ----------
    wave : Array
        (n,) one channel.
    rate_hz : float
        Samples a second.
    floor : float
        What rounding and dither alone may leave.
    """
    size = np.abs(wave)
    loud = size > max(floor, 1e-3 * float(np.max(size, initial=0.0)))
    if not np.any(loud):
        return None
    # Found roughly, it is followed back to a hundredth of the first blow's own peak.
    rough, reach = int(np.argmax(loud)), round(_BLOW_S * rate_hz)
    near = size[max(0, rough - reach) : rough + reach]
    return (max(0, rough - reach) + int(np.argmax(near > max(floor, 0.01 * float(np.max(near)))))) / rate_hz


@dataclass(frozen=True, slots=True)
class Fit:
    """How a piece fits into a wave: ``late`` by so many samples, ``likeness`` 1 where it is the same but for level."""

    late: float
    likeness: float


def fit_piece(wave: Array, piece: Array, *, begin: int, reach: int) -> Fit:
    """Find where a short piece fits best in a wave, near where it should be.

    Normalised cross-correlation: over a few samples first, then as far as ``reach``; the rest between two samples
    from the wave interpolated sixteen-fold.

    Parameters
    ----------
    wave : Array
        (n,) one channel, any level.
    piece : Array
        (k,) not silent.
    begin : int
        Sample of the wave at which the piece should begin.
    reach : int
        How many samples it is looked for before and after.
    """
    for span in (_NEAR, reach):
        places = _likeness(wave, piece, begin - span, 2 * span + 1)
        best = int(np.argmax(places))
        if places[best] > _SAME and 0 < best < 2 * span:
            break
    from scipy.signal import resample_poly

    whole = begin - span + best
    around = _cut(wave, whole - _NEAR, len(piece) + 2 * _NEAR)
    fine = resample_poly(around, _FINE, 1, padtype="constant")
    steps = np.arange(-_FINE, _FINE + 1)
    rows = fine[(_NEAR * _FINE + steps)[:, None] + _FINE * np.arange(len(piece))]
    size = np.sqrt(np.sum(rows**2, axis=1) * np.sum(piece**2))
    likeness = (rows @ piece) / np.where(size > 0.0, size, np.inf)
    top = int(np.clip(np.argmax(likeness), 1, len(steps) - 2))
    before, here, after = likeness[top - 1 : top + 2]
    bend = before - 2.0 * here + after
    rest = float(np.clip(0.5 * (before - after) / bend, -1.0, 1.0)) if bend < 0.0 else 0.0
    return Fit(whole - begin + (float(steps[top]) + rest) / _FINE, float(here))


def _cut(wave: Array, begin: int, count: int) -> Array:
    # Silence beyond the ends.
    out = np.zeros(count)
    first, last = max(0, begin), min(len(wave), begin + count)
    if last > first:
        out[first - begin : last - begin] = wave[first:last]
    return out


def _likeness(wave: Array, piece: Array, begin: int, count: int) -> Array:
    # Normalised correlation (count,) at ``count`` places from ``begin`` on.
    from scipy.signal import correlate

    part = _cut(wave, begin, count + len(piece) - 1)
    found = correlate(part, piece, mode="valid", method="auto")
    energy = np.concatenate(([0.0], np.cumsum(part**2)))
    size = np.maximum(energy[len(piece) :] - energy[: -len(piece)], 1e-12 * energy[-1])
    return np.asarray(found / np.sqrt(np.maximum(size, 1e-300) * np.sum(piece**2)))
