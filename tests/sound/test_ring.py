"""Closed-form ringing against a recursion from a general signal library."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.signal import lfilter

from resonate.errors import ResonateError
from resonate.sound.ring import exponents, powers, ring

RATE = 48000.0


def modes(count, seed, t60_s=(0.2, 3.0)):
    generator = np.random.default_rng(seed)
    omega = 2.0 * np.pi * np.sort(generator.uniform(50.0, 20e3, count))
    decay = np.log(1000.0) / generator.uniform(*t60_s, count)
    z = generator.normal(size=count) + 1j * generator.normal(size=count)
    return omega, decay, z


def recursion(z, weights, omega, decay, count):
    """Two-pole recursions (scipy.signal.lfilter), one a mode and channel."""
    impulse = np.zeros(count)
    impulse[0] = 1.0
    pole = np.exp((-decay + 1j * np.sqrt(omega**2 - decay**2)) / RATE)
    out = np.zeros((count, weights.shape[1]))
    for channel in range(weights.shape[1]):
        for p, amplitude in zip(pole, z * weights[:, channel], strict=True):
            ahead = [amplitude.real, -(amplitude * np.conj(p)).real]
            out[:, channel] += lfilter(ahead, [1.0, -2.0 * p.real, abs(p) ** 2], impulse)
    return out


@pytest.mark.parametrize("count", [1, 2, 255, 256, 257, 20000])
def test_products_equal_the_recursion(count):
    omega, decay, z = modes(60, 1)
    weights = np.random.default_rng(2).normal(size=(60, 3)) + 0.5j
    got = ring(z, weights, omega=omega, decay=decay, rate_hz=RATE, count=count, tolerance=0.0)
    exact = recursion(z, weights, omega, decay, count)
    # Rounding of the recursion grows with its length: 20000 steps of 1e-16 and more.
    np.testing.assert_allclose(got, exact, atol=1e-11 * np.max(np.abs(exact)))


@pytest.mark.parametrize("tolerance", [1e-3, 1e-6, 1e-9])
def test_dropped_modes_stay_below_the_tolerance(tolerance):
    omega, decay, z = modes(200, 3, t60_s=(0.05, 0.6))
    weights = np.ones((200, 1))
    full = ring(z, weights, omega=omega, decay=decay, rate_hz=RATE, count=60000, tolerance=0.0)
    short = ring(z, weights, omega=omega, decay=decay, rate_hz=RATE, count=60000, tolerance=tolerance)
    error = np.max(np.abs(full - short))
    assert error <= tolerance * np.max(np.abs(full))
    # It must drop something, or the test shows nothing.
    assert error > 0.0


@settings(max_examples=40, deadline=None)
@given(
    seed=st.integers(0, 2**32 - 1),
    count=st.integers(1, 40),
    spread=st.floats(0.0, 8.0),
    tolerance=st.sampled_from([1e-2, 1e-4, 1e-6]),
)
def test_tolerance_holds_for_any_amplitudes(seed, count, spread, tolerance):
    generator = np.random.default_rng(seed)
    omega, decay, z = modes(count, seed, t60_s=(0.02, 0.5))
    # Amplitudes over many powers of ten, some zero.
    weights = 10.0 ** generator.uniform(-spread, 0.0, (count, 2)) * generator.integers(0, 2, (count, 2))
    call = {"omega": omega, "decay": decay, "rate_hz": RATE, "count": 30000}
    full = ring(z, weights, tolerance=0.0, **call)
    short = ring(z, weights, tolerance=tolerance, **call)
    assert np.all(np.max(np.abs(full - short), axis=0) <= tolerance * np.max(np.abs(full), axis=0))


def test_a_known_peak_sets_what_may_be_dropped():
    omega, decay, z = modes(50, 4)
    weights = np.ones((50, 1))
    call = {"omega": omega, "decay": decay, "rate_hz": RATE, "count": 4000}
    full = ring(z, weights, tolerance=0.0, **call)
    coarse = ring(z, weights, peak=np.array([1e9]), tolerance=1e-6, **call)
    np.testing.assert_array_equal(coarse, np.zeros_like(full))


def test_a_mode_without_loss_keeps_its_amplitude():
    got = ring(
        np.array([-2.0j]), np.ones((1, 1)), omega=np.array([2.0 * np.pi * 1000.0]), decay=np.zeros(1),
        rate_hz=RATE, count=96000,
    )  # fmt: skip
    exact = 2.0 * np.sin(2.0 * np.pi * np.arange(96000) / 48.0)
    # Phase after 1000 * 2 turns, to 1e-16 of it.
    np.testing.assert_allclose(got[:, 0], exact, atol=2e-11)


def test_powers_are_powers():
    step = np.exp(np.array([-0.01 + 0.3j, -0.2 - 1.0j]))
    np.testing.assert_allclose(powers(step, 100), step ** np.arange(100)[:, None], rtol=1e-12)


def test_no_modes_give_silence():
    none = np.zeros(0)
    got = ring(none + 0j, np.zeros((0, 2)), omega=none, decay=none, rate_hz=RATE, count=10)
    np.testing.assert_array_equal(got, np.zeros((10, 2)))


def test_same_bits_every_time():
    omega, decay, z = modes(300, 9)
    weights = np.ones((300, 2))
    first, second = (ring(z, weights, omega=omega, decay=decay, rate_hz=RATE, count=30000) for _ in range(2))
    np.testing.assert_array_equal(first, second)


def test_an_overdamped_mode_is_refused():
    with pytest.raises(ResonateError, match="faster than it swings"):
        exponents(np.array([100.0]), np.array([200.0]))


def test_lengths_must_agree():
    with pytest.raises(ResonateError, match="2 states for 1 modes"):
        ring(
            np.ones(2) + 0j, np.ones((2, 1)), omega=np.array([9.0]), decay=np.zeros(1), rate_hz=RATE, count=4
        )
