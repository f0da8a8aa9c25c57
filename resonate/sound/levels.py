"""Levels of a sound: peak, true peak, loudness, sound pressure level; and scaling to full scale."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from resonate.errors import TakeError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.scene.model import LevelSpec
    from resonate.sound.render import Sound

    Array = NDArray[np.float64]

REFERENCE_PA = 20e-6  # ISO 1683
OVERSAMPLING = 8
# ITU-R BS.1770-5, Annex 1: block, overlap, gates and the constant of the meter.
MOMENTARY_S = 0.4
HOP_S = 0.1
ABSOLUTE_GATE_LUFS = -70.0
RELATIVE_GATE_LU = -10.0
OFFSET_LU = -0.691
# Samples filtered at once.
BLOCK = 1 << 17
# Samples on each side that interpolation between two samples takes in, and pieces it is done in.
HALF_TAPS = 32
PIECE = 64


@dataclass(frozen=True, slots=True)
class Levels:
    """What a meter reads. Decibels; ``-inf`` for silence.

    ``peak_dbfs`` largest sample and ``true_peak_dbtp`` largest value between samples, re full scale;
    ``momentary_lufs`` largest momentary loudness (the headline for short sounds) and
    ``integrated_lufs`` gated loudness, None where no block passes the gate; ``peak_spl_db`` unweighted peak
    and ``mean_spl_db`` equivalent level of the loudest channel, re 20 uPa;
    ``full_scale_pa`` the pressure of full scale.
    """

    peak_dbfs: float
    true_peak_dbtp: float
    momentary_lufs: float
    integrated_lufs: float | None
    peak_spl_db: float
    mean_spl_db: float
    full_scale_pa: float


@dataclass(frozen=True, slots=True)
class Delivered:
    """A sound in units of full scale: ``samples`` (samples, channels) and the pressure of full scale."""

    samples: Array
    rate_hz: int
    full_scale_pa: float


def deliver_level(sound: Sound, level: LevelSpec, *, full_scale_pa: float) -> Delivered:
    """Scale pressure to full scale as the scene asks; a sound is never limited or squeezed.

    Parameters
    ----------
    sound : Sound
        Pressure.
    level : LevelSpec
        ``physical``: 1 stands for ``full_scale_pa``; ``peak``: the largest sample is ``level.db``.
    full_scale_pa : float
        Pressure of full scale, Pa.

    Raises
    ------
    TakeError
        If a sample would exceed full scale; the message states the gain or full scale needed.
    """
    largest_pa = largest_of(sound.pressure_pa)
    if level.kind == "peak":
        if largest_pa > 0.0:
            full_scale_pa = largest_pa / 10.0 ** (level.db / 20.0)
    elif largest_pa > full_scale_pa:
        over_db = 20.0 * np.log10(largest_pa / full_scale_pa)
        raise TakeError(
            what=f"a peak of {largest_pa:.4g} Pa, {over_db:.2f} dB above full scale ({full_scale_pa:.4g} Pa)",
            where="[sound] full_scale",
            fix=f"a gain of -{over_db:.2f} dB is needed: set full_scale to at least "
            f'"{_round_up(largest_pa):g} Pa", move the microphone away, or use level = {{peak = "-1 dB"}}',
        )
    return Delivered(sound.pressure_pa / full_scale_pa, sound.rate_hz, full_scale_pa)


def largest_of(values: Array) -> float:
    """Largest magnitude of an array, without a copy of it; 0 if it is empty."""
    return max(float(np.max(values)), -float(np.min(values)), 0.0) if values.size else 0.0


def measure(delivered: Delivered) -> Levels:
    """Read all meters on a delivered sound."""
    samples, rate_hz = delivered.samples, delivered.rate_hz
    largest = largest_of(samples)
    power = float(np.max(np.einsum("nc,nc->c", samples, samples), initial=0.0)) / max(1, len(samples))
    energy = weighted_energy(samples, rate_hz)
    scale_db = _db(delivered.full_scale_pa / REFERENCE_PA)
    return Levels(
        peak_dbfs=_db(largest),
        true_peak_dbtp=_db(true_peak(samples)),
        momentary_lufs=momentary_lufs(energy, rate_hz),
        integrated_lufs=integrated_lufs(energy, rate_hz),
        peak_spl_db=_db(largest) + scale_db,
        mean_spl_db=_db(power**0.5) + scale_db,
        full_scale_pa=delivered.full_scale_pa,
    )


def true_peak(samples: Array) -> float:
    """Largest magnitude between the samples, by eight-fold Kaiser-windowed interpolation.

    References
    ----------
    ITU-R BS.1770-5, Annex 2 (the four-fold filter there reads up to 0.3 dB off near a quarter of the rate).
    """
    largest = largest_of(samples)
    taps = _interpolator(HALF_TAPS)
    # An interpolated value is at most this many times its loudest neighbour: quiet places are skipped.
    reach = float(np.max(np.sum(np.abs(taps), axis=1)))
    for channel in np.asarray(samples).T:
        blocks = -(-len(channel) // PIECE)
        padded = np.zeros((blocks + 2) * PIECE)
        padded[PIECE : PIECE + len(channel)] = channel
        pieces = padded.reshape(-1, PIECE)
        loud = np.maximum(np.max(pieces, axis=1), -np.min(pieces, axis=1))
        local = np.maximum(np.maximum(loud[:-2], loud[1:-1]), loud[2:])
        windows = np.lib.stride_tricks.sliding_window_view(padded, 2 * HALF_TAPS)
        for block in np.argsort(-local, kind="stable"):
            if local[block] * reach <= largest:
                break
            begin = (block + 1) * PIECE - HALF_TAPS
            largest = max(largest, largest_of(windows[begin : begin + PIECE + 1] @ taps.T))
    return largest


def _interpolator(half: int) -> Array:
    # (7, 2 half) taps for the fractions 1/8 to 7/8 between the two middle samples of a window.
    fraction = np.arange(1, OVERSAMPLING)[:, None] / OVERSAMPLING
    offset = np.arange(2 * half) - (half - 1) - fraction
    window = np.i0(12.0 * np.sqrt(np.maximum(1.0 - (offset / half) ** 2, 0.0))) / np.i0(12.0)
    return np.asarray(np.sinc(offset) * window)


def weighted_energy(samples: Array, rate_hz: float) -> Array:
    """Sum up the K-weighted squares over all channels: running sum (samples + 1,).

    References
    ----------
    ITU-R BS.1770-5, Annex 1. The two filters are given there at 48 kHz; the analogue prototypes that give
    these coefficients at 48 kHz and the same response at any rate are those of De Man,
    Evaluation of implementations of the EBU R128 loudness measurement, AES 145 (2018).
    """
    from scipy.signal import sosfilt

    sections = k_weighting(rate_hz)
    energy = np.zeros(len(samples) + 1)
    for channel in np.asarray(samples).T:
        state = np.zeros((2, 2))
        for begin in range(0, len(channel), BLOCK):
            part, state = sosfilt(sections, channel[begin : begin + BLOCK], zi=state)
            energy[begin + 1 : begin + 1 + BLOCK] += part**2
    return np.cumsum(energy, out=energy)


def k_weighting(rate_hz: float) -> Array:
    """Second-order sections (2, 6) of the K weighting at any rate: shelf, then high-pass."""
    shelf_hz, shelf_db, shelf_q = 1681.974450955533, 3.999843853973347, 0.7071752369554196
    turn = np.tan(np.pi * shelf_hz / rate_hz)
    high = 10.0 ** (shelf_db / 20.0)
    band = high**0.4996667741545416
    scale = 1.0 + turn / shelf_q + turn**2
    shelf = [
        (high + band * turn / shelf_q + turn**2) / scale,
        2.0 * (turn**2 - high) / scale,
        (high - band * turn / shelf_q + turn**2) / scale,
        1.0,
        2.0 * (turn**2 - 1.0) / scale,
        (1.0 - turn / shelf_q + turn**2) / scale,
    ]
    pass_hz, pass_q = 38.13547087602444, 0.5003270373238773
    turn = np.tan(np.pi * pass_hz / rate_hz)
    scale = 1.0 + turn / pass_q + turn**2
    high_pass = [1.0, -2.0, 1.0, 1.0, 2.0 * (turn**2 - 1.0) / scale, (1.0 - turn / pass_q + turn**2) / scale]
    return np.array([shelf, high_pass])


def momentary_lufs(energy: Array, rate_hz: float) -> float:
    """Largest loudness of any 0.4 s, wherever it begins, silence before and after included.

    ``energy`` is that of ``weighted_energy``. Does not depend on where a short sound falls in a grid of
    blocks, nor on how much silence is kept round it.
    """
    width = round(MOMENTARY_S * rate_hz)
    if len(energy) <= width:
        return _lufs(float(energy[-1]) / width)
    # The sum only grows, so a window that hangs over an end never reads more than the one that touches it.
    starts = range(0, len(energy) - width, BLOCK)
    largest = 0.0
    for begin in starts:
        early = energy[begin : min(begin + BLOCK, len(energy) - width)]
        late = energy[begin + width : begin + width + len(early)]
        largest = max(largest, float(np.max(late - early)))
    return _lufs(largest / width)


def integrated_lufs(energy: Array, rate_hz: float) -> float | None:
    """Gated loudness of the whole; None where no block of 0.4 s passes the absolute gate.

    ``energy`` is that of ``weighted_energy``.
    """
    width, hop = round(MOMENTARY_S * rate_hz), round(HOP_S * rate_hz)
    begins = np.arange(0, len(energy) - width, hop)
    blocks = (energy[begins + width] - energy[begins]) / width
    blocks = blocks[blocks > 10.0 ** ((ABSOLUTE_GATE_LUFS - OFFSET_LU) / 10.0)]
    if len(blocks) == 0:
        return None
    gate = np.mean(blocks) * 10.0 ** (RELATIVE_GATE_LU / 10.0)
    return _lufs(float(np.mean(blocks[blocks > gate])))


def _lufs(power: float) -> float:
    return float(OFFSET_LU + 10.0 * np.log10(power)) if power > 0.0 else float("-inf")


def _db(ratio: float) -> float:
    return float(20.0 * np.log10(ratio)) if ratio > 0.0 else float("-inf")


def _round_up(value: float) -> float:
    # To two digits, upwards.
    step = 10.0 ** (np.floor(np.log10(value)) - 1.0)
    return float(np.ceil(value / step) * step)
