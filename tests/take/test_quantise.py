"""Rounding and dither against theory."""

from __future__ import annotations

import numpy as np
import pytest

from resonate.take.quantise import encode

# Lipshitz, Wannamaker & Vanderkooy, Quantization and dither: a theoretical survey, J. Audio Eng. Soc. 40,
# 355-375 (1992). Signal to noise of a full-scale sine, 6.02 N + 1.76 dB, and the root mean square of the total
# error with triangular dither, half a step, in dB re full scale. Computed from the closed forms.
SINE_DB = {"16-bit": 98.0905112, "24-bit": 146.255311}
DITHERED_DB = {"16-bit": -96.329599, "24-bit": -144.4944}
# Common practice for a rendered file; the noise of 200,000 samples is known to 0.02 dB.
TOLERANCE_DB = 0.1


def decode(data, sample_format):
    if sample_format == "16-bit":
        return np.frombuffer(data, "<i2") / 2.0**15
    parts = np.frombuffer(data, np.uint8).reshape(-1, 3).astype(np.int64)
    codes = parts @ np.array([1, 256, 65536])
    return np.where(codes >= 2**23, codes - 2**24, codes) / 2.0**23


def db(ratio):
    return 20.0 * np.log10(ratio)


def rms(values):
    return float(np.sqrt(np.mean(values**2)))


def sine(frames=200_000):
    # No simple ratio to the rate: the error spreads over all codes. One step below full scale.
    return ((1.0 - 2.0**-14) * np.sin(2.0 * np.pi * 997.0 / 48000.0 * np.arange(frames)))[:, None]


@pytest.mark.parametrize("sample_format", SINE_DB)
def test_plain_rounding_has_the_textbook_noise(sample_format):
    samples = sine()
    error = decode(encode(samples, sample_format), sample_format) - samples[:, 0]
    assert db(rms(samples) / rms(error)) == pytest.approx(SINE_DB[sample_format], abs=TOLERANCE_DB)


@pytest.mark.parametrize("sample_format", DITHERED_DB)
def test_triangular_dither_has_the_textbook_noise(sample_format):
    samples = sine()
    read = decode(encode(samples, sample_format, rng=np.random.default_rng(1)), sample_format)
    assert db(rms(read - samples[:, 0])) == pytest.approx(DITHERED_DB[sample_format], abs=TOLERANCE_DB)


@pytest.mark.parametrize("part", [0.0, 0.1, 0.25, 0.5, 0.8])
def test_dithered_error_knows_nothing_of_the_signal(part):
    # The survey's section 4: with triangular dither two steps wide the error's mean is zero and its
    # mean square a quarter of a squared step, wherever between two codes the signal lies.
    count = 400_000
    still = np.full((count, 1), (1000.0 + part) / 2.0**15)
    read = decode(encode(still, "16-bit", rng=np.random.default_rng(11)), "16-bit")
    error = (read - still[:, 0]) * 2.0**15
    # Five standard deviations of the mean of 400,000 values of spread 0.5, and of their squares.
    assert np.mean(error) == pytest.approx(0.0, abs=5.0 * 0.5 / np.sqrt(count))
    assert np.mean(error**2) == pytest.approx(0.25, abs=5.0 * 0.35 / np.sqrt(count))


def test_without_dither_the_error_follows_the_signal():
    # The same measurement fails on plain rounding, so it can tell the two apart.
    still = np.full((1000, 1), 1000.25 / 2.0**15)
    error = (decode(encode(still, "16-bit"), "16-bit") - still[:, 0]) * 2.0**15
    assert np.mean(error) == pytest.approx(-0.25)


def test_dither_is_triangular():
    # A code k away from zero comes up as often as a triangle of base two, smeared by rounding: 1/8, 3/4, 1/8.
    read = np.frombuffer(encode(np.zeros((400_000, 1)), "16-bit", rng=np.random.default_rng(2)), "<i2")
    values, counts = np.unique(read, return_counts=True)
    np.testing.assert_array_equal(values, [-1, 0, 1])
    np.testing.assert_allclose(counts / len(read), [0.125, 0.75, 0.125], atol=5.0 * 0.5 / np.sqrt(len(read)))
