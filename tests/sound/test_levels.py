"""Meters against the published test signals and a second loudness meter."""

from __future__ import annotations

from types import SimpleNamespace

import numpy as np
import pyloudnorm
import pytest

from resonate.errors import TakeError
from resonate.sound.levels import (
    Delivered,
    deliver_level,
    integrated_lufs,
    measure,
    momentary_lufs,
    true_peak,
    weighted_energy,
)
from resonate.sound.render import Sound


def tone(frequency, level_db, seconds, *, rate=48000, channels=2, phase=0.0):
    times = np.arange(round(seconds * rate)) / rate
    wave = 10.0 ** (level_db / 20.0) * np.sin(2.0 * np.pi * frequency * times + phase)
    return np.repeat(wave[:, None], channels, axis=1)


def integrated(samples, rate=48000):
    return integrated_lufs(weighted_energy(samples, rate), rate)


def test_full_scale_sine_reads_minus_three():
    # ITU-R BS.1770-5, Annex 1: 0 dBFS at 997 Hz in one front channel reads -3.01 LKFS.
    np.testing.assert_allclose(integrated(tone(997.0, 0.0, 20.0, channels=1)), -3.01, atol=0.01)


# EBU Tech 3341 (2016), table 1, cases 1 to 3: level and length of 1 kHz in both channels; target +-0.1 LU.
# The second value is what the filters of BS.1770 give exactly.
CASES = [
    ([(-23.0, 20.0)], -23.0, -22.9933),
    ([(-33.0, 20.0)], -33.0, -32.9933),
    ([(-36.0, 10.0), (-23.0, 60.0), (-36.0, 10.0)], -23.0, -23.01387),
]


@pytest.mark.parametrize(("parts", "target", "exact"), CASES)
def test_integrated_loudness_of_the_broadcast_signals(parts, target, exact):
    read = integrated(np.concatenate([tone(1000.0, *part) for part in parts]))
    np.testing.assert_allclose(read, target, atol=0.1)
    np.testing.assert_allclose(read, exact, atol=1e-4)


# EBU Tech 3341 (2016), table 1, cases 15 to 19: samples a period, phase in degrees, amplitude, true peak in dB;
# tolerance +0.2, -0.4 dB. The tones fade in and out, so that their ends add no peak of their own.
PEAKS = [
    (4, 0.0, 0.5, -6.02),
    (4, 45.0, 0.5, -6.02),
    (6, 60.0, 0.5, -6.02),
    (8, 67.5, 0.5, -6.02),
    (4, 45.0, 1.41, 2.98),
]


@pytest.mark.parametrize(("period", "phase", "amplitude", "level"), PEAKS)
def test_true_peak_of_the_broadcast_signals(period, phase, amplitude, level):
    index = np.arange(48000)
    fade = np.clip(np.minimum(index, index[::-1]) / 4800.0, 0.0, 1.0)
    wave = amplitude * np.sin(2.0 * np.pi * index / period + np.deg2rad(phase)) * fade
    read = 20.0 * np.log10(true_peak(wave[:, None]))
    # Eight-fold reading: cos(pi / 8 / 4) at worst, -0.04 dB.
    np.testing.assert_allclose(read, level, atol=0.05)


def test_true_peak_of_an_impulse_is_its_sample():
    samples = np.zeros((300, 1))
    samples[150] = -0.7
    np.testing.assert_allclose(true_peak(samples), 0.7, rtol=1e-12)


def test_true_peak_skips_nothing_loud():
    # Against plain eight-fold interpolation of the whole by Fourier transform (periodic, so faded at both ends).
    generator = np.random.default_rng(8)
    samples = generator.normal(size=4096) * np.sin(np.pi * np.arange(4096) / 4096) ** 2
    spectrum = np.fft.rfft(samples)
    # What lies in the top tenth of the band is where a finite interpolator differs from the ideal one.
    spectrum[int(0.85 * len(spectrum)) :] = 0.0
    samples = np.fft.irfft(spectrum)
    plain = np.max(np.abs(np.fft.irfft(spectrum, 8 * 4096))) * 8.0
    np.testing.assert_allclose(true_peak(samples[:, None]), plain, rtol=1e-4)


@pytest.mark.parametrize("rate", [44100, 48000, 96000])
def test_a_second_meter_reads_the_same(rate):
    generator = np.random.default_rng(2)
    fall = np.exp(-np.arange(4 * rate) / (0.8 * rate))
    samples = 0.3 * generator.normal(size=(4 * rate, 2)) * fall[:, None]
    meter = pyloudnorm.Meter(rate, filter_class="DeMan")
    # pyloudnorm rounds block edges its own way: a block of 19200 samples shifts by one at most.
    np.testing.assert_allclose(integrated(samples, rate), meter.integrated_loudness(samples), atol=2e-3)


@pytest.mark.parametrize("before", [0.0, 0.013, 0.5])
@pytest.mark.parametrize("after", [0.0, 2.0])
def test_a_short_sound_reads_the_same_wherever_it_lies(before, after):
    # A burst of 0.1 s at -23 dBFS in two channels: a quarter of the 0.4 s window, 6.02 LU below the tone. Common
    # practice for sounds shorter than the window: silence fills it.
    burst = tone(1000.0, -23.0, 0.1)
    silence = [np.zeros((round(seconds * 48000), 2)) for seconds in (before, after)]
    samples = np.concatenate((silence[0], burst, silence[1]))
    read = momentary_lufs(weighted_energy(samples, 48000), 48000)
    np.testing.assert_allclose(read, -22.9933 - 6.0206, atol=0.03)


def test_integrated_needs_a_whole_block():
    energy = weighted_energy(tone(1000.0, -23.0, 0.1), 48000)
    assert integrated_lufs(energy, 48000) is None
    quiet = weighted_energy(tone(1000.0, -90.0, 2.0), 48000)
    assert integrated_lufs(quiet, 48000) is None


def test_pascal_become_levels():
    # ISO 1683: 1 Pa rms is 93.98 dB re 20 uPa; its peak is 3.01 dB more.
    wave = np.sqrt(2.0) * np.sin(2.0 * np.pi * 1000.0 * np.arange(48000) / 48000)
    levels = measure(deliver_level(Sound(wave[:, None], 48000, ("mic",)), physical(), full_scale_pa=20.0))
    np.testing.assert_allclose(levels.mean_spl_db, 93.9794, atol=1e-3)
    np.testing.assert_allclose(levels.peak_spl_db, 96.9897, atol=1e-3)
    # 20 Pa is 120 dB re 20 uPa.
    np.testing.assert_allclose(levels.peak_dbfs, 96.9897 - 120.0, atol=1e-3)
    assert levels.full_scale_pa == 20.0


def physical():
    return SimpleNamespace(kind="physical", db=0.0)


def test_a_peak_can_be_asked_for():
    pressure = np.random.default_rng(1).normal(size=(1000, 2))
    level = SimpleNamespace(kind="peak", db=-6.0)
    delivered = deliver_level(Sound(pressure, 48000, ("a", "b")), level, full_scale_pa=20.0)
    np.testing.assert_allclose(np.max(np.abs(delivered.samples)), 10.0**-0.3, rtol=1e-14)
    np.testing.assert_allclose(delivered.samples * delivered.full_scale_pa, pressure, rtol=1e-14)


def test_silence_can_be_delivered_and_read():
    level = SimpleNamespace(kind="peak", db=-6.0)
    levels = measure(deliver_level(Sound(np.zeros((100, 1)), 48000, ("a",)), level, full_scale_pa=20.0))
    assert levels.peak_dbfs == levels.true_peak_dbtp == levels.momentary_lufs == -np.inf
    assert levels.integrated_lufs is None


def test_clipping_is_refused_with_the_gain_needed():
    sound = Sound(np.array([[0.0], [-40.0]]), 48000, ("mic",))
    with pytest.raises(TakeError, match=r'(?s)40 Pa.*6\.02 dB above.*gain of -6\.02 dB.*"40 Pa"'):
        deliver_level(sound, physical(), full_scale_pa=20.0)


def test_empty_sound_reads_silence():
    levels = measure(Delivered(np.zeros((0, 1)), 48000, 20.0))
    assert levels.mean_spl_db == -np.inf
