"""Where a waveform stands in time: against the same waveform made again, and by its onsets."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

from resonate.errors import TakeError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

#: Phase is read up to this share of the sample rate; above it delivery filters end.
_BAND: Final = 0.4


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
    onset is where the sound first passes a twentieth of that peak and twice what was there.

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
    part = np.abs(wave[begin:end])
    quiet = np.abs(wave[max(0, begin - reach) : begin])
    peak, floor = float(np.max(part, initial=0.0)), float(np.max(quiet, initial=0.0))
    # A rise of 12 dB is an onset beyond doubt; less may be a beat between modes.
    if peak <= 4.0 * floor or peak == 0.0:
        return None
    threshold = max(0.05 * peak, 2.0 * floor)
    return (begin + int(np.argmax(part > threshold))) / rate_hz
