"""The shutter mean against plain numerical averages of the same motion."""

from __future__ import annotations

import numpy as np
import pytest

from resonate.motion.shutter import displacement, free_mean, shutter_mean

FREQUENCY_HZ = [1e-5, 0.4, 3.0, 47.0, 440.0, 2311.0, 9021.0]
DECAY = [1e-6, 0.05, 0.7, 4.0, 11.0, 300.0, 20000.0]


@pytest.fixture
def track(kit):
    gains = np.array([1.0, 0.8, -1.1, 0.6, 1.3, -0.7, 0.9])
    return kit.Track(
        kit.modes(FREQUENCY_HZ, DECAY),
        [
            (0.1003, 1.0 / 96e3, kit.half_sine(40.0, 61), gains),
            (0.1150, 1.0 / 192e3, kit.half_sine(900.0, 13), -gains[::-1]),
            (0.2871, 1.0 / 24e3, kit.half_sine(3.0, 95), gains),
        ],
    )


def oversampled_mean(track, t, shutter_s):
    """64 evaluations a cycle of the fastest mode, Gauss's rule between the jumps of the force."""
    low, high = max(t - shutter_s / 2, track.begin_s), t + shutter_s / 2
    panels = int(np.ceil(16 * (high - low) * max(FREQUENCY_HZ)))
    cuts = [np.linspace(low, high, panels + 1)]
    cuts += [p.begin_s + p.step_s * np.arange(p.force_n.shape[1] + 1) for p in track.segments if p.is_contact]
    cuts = np.unique(np.clip(np.concatenate(cuts), low, high))
    nodes, weights = np.polynomial.legendre.leggauss(4)
    middle, half = (cuts[1:] + cuts[:-1]) / 2, np.diff(cuts) / 2
    z = track.modal((middle[:, None] + half[:, None] * nodes).ravel())
    q = displacement(z, track.modes.omega, track.modes.decay.total)
    return q @ (half[:, None] * weights).ravel() / shutter_s


@pytest.mark.parametrize(
    ("t", "shutter_s"),
    [
        (0.05, 1 / 48),  # before any contact
        (0.1003, 1 / 48),  # opens before, closes after a contact
        (0.1005, 1 / 5000),  # lies inside a contact
        (0.1068, 1 / 24),  # two contacts
        (0.1150, 1 / 48),  # ends in the first, holds the second
        (0.2, 1 / 48),  # free
        (0.289, 1 / 1000),  # opens inside a contact, closes inside it
        (0.2905, 1 / 200),
        (0.35, 1 / 96),
    ],
)
def test_shutter_mean_equals_oversampled_mean(track, t, shutter_s):
    expected = oversampled_mean(track, t, shutter_s)

    mean = shutter_mean(track, np.array([t]), shutter_s=shutter_s)[:, 0]

    # 1e-9 of the amplitude that each mode has at any time of the take.
    scale = np.max(np.abs(track.modal(np.linspace(0.1, 0.4, 301))), axis=1) / track.modes.omega
    np.testing.assert_allclose(mean / scale, expected / scale, rtol=0.0, atol=1e-9)
    if t > 0.1:
        assert np.any(expected != 0.0)


def test_many_times_at_once_are_each_as_alone(track):
    times = np.linspace(0.0, 0.35, 37)
    together = shutter_mean(track, times, shutter_s=1 / 48)
    alone = np.column_stack(
        [shutter_mean(track, times[n : n + 1], shutter_s=1 / 48)[:, 0] for n in range(37)]
    )
    np.testing.assert_array_equal(together, alone)


def test_no_shutter_is_the_instantaneous_displacement(track):
    times = np.array([0.05, 0.1006, 0.1150, 0.3])
    expected = displacement(track.modal(times), track.modes.omega, track.modes.decay.total)
    np.testing.assert_array_equal(shutter_mean(track, times, shutter_s=0.0), expected)


def test_a_steady_tone_keeps_the_sinc_of_its_phase(kit):
    # A box of length T leaves sin(pi f T)/(pi f T) of a steady sine: the transfer of a moving
    # average. At 440 Hz, half of 1/24 s: 440/48 cycles, 1/(pi 440/48) = 3.5 % at most.
    omega = np.array([2 * np.pi * 440.0])
    expected = np.sin(np.pi * 440 / 48) / (np.pi * 440 / 48)
    assert abs(expected) <= 0.0348
    times = np.linspace(1.0, 1.01, 7)
    z = omega * np.exp(1j * omega * (times - 1 / 96))[None, :]
    mean = free_mean(z, omega, np.zeros(1), np.full(7, 1 / 48))
    np.testing.assert_allclose(mean[0], expected * np.sin(omega * times), atol=1e-12)


def test_strong_damping_neither_overflows_nor_vanishes():
    # a T = 4000: exp(a T) is beyond the numbers, while the mean is wd / (w^2 T) / wd exactly.
    omega, decay, shutter_s = np.array([3e5]), np.array([2e5]), 0.02
    z = np.array([[1.0 + 0.0j]])
    mean = free_mean(z, omega, decay, np.array([shutter_s]))
    np.testing.assert_allclose(mean, 1.0 / (omega**2 * shutter_s) * np.ones((1, 1)), rtol=1e-12)


def test_a_window_that_opens_before_the_run_counts_the_rest(kit):
    track = kit.Track(kit.modes([5.0], [0.1]), [(0.0, 1e-4, np.full(10, 20.0), [1.0])], begin_s=-0.001)
    expected = oversampled_mean_from_the_start(track)
    mean = shutter_mean(track, np.array([0.0]), shutter_s=0.04)
    np.testing.assert_allclose(mean[0, 0], expected, rtol=1e-9)


def oversampled_mean_from_the_start(track):
    nodes, weights = np.polynomial.legendre.leggauss(4)
    cuts = np.concatenate(
        [np.linspace(-0.001, 0.0, 9)[:-1], np.linspace(0, 0.001, 11), np.linspace(0.001, 0.02, 200)[1:]]
    )
    middle, half = (cuts[1:] + cuts[:-1]) / 2, np.diff(cuts) / 2
    z = track.modal((middle[:, None] + half[:, None] * nodes).ravel())
    q = displacement(z, track.modes.omega, track.modes.decay.total)[0]
    return float(q @ (half[:, None] * weights).ravel()) / 0.04


def test_a_body_that_rings_from_the_start_was_at_rest_before(kit):
    track = kit.Track(kit.modes([5.0], [0.1]), [], begin_s=-0.001)
    track.segments[0].z[:] = 3.0
    expected = oversampled_mean_from_the_start(track)
    np.testing.assert_allclose(
        shutter_mean(track, np.array([0.0]), shutter_s=0.04)[0, 0], expected, rtol=1e-12
    )
