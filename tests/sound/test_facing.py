"""Moving bodies: weights interpolated between few poses against weights at every sample."""

from __future__ import annotations

from types import SimpleNamespace

import numpy as np
import pytest

from resonate.sound.facing import Facing, facing
from resonate.sound.render import render

SPEED = 343.2


class Lobes:
    """Many-lobed directivity, one pattern a mode: cos(k R x / distance) / distance."""

    radius_m = 0.15
    warnings = ()

    def __init__(self, modes):
        self.turns = modes.omega / SPEED * self.radius_m

    def weights(self, place_m, reference_m):
        place_m = np.asarray(place_m)
        distance = np.linalg.norm(place_m, axis=-1)
        return np.cos(self.turns * (place_m[..., :1] / distance[..., None])).T / distance + 0j

    def every(self, place_m):
        distance = np.linalg.norm(place_m, axis=1)
        return np.cos(np.outer(self.turns, place_m[:, 0] / distance)) / distance


class Still(Lobes):
    def weights(self, place_m, reference_m):
        return super().weights(np.asarray(place_m)[None], reference_m)[:, 0]


def turning(spin_rad_s, begin_s, speed_m_s=0.0):
    """At rest until ``begin_s``, then turning about z and moving along x."""

    def motion(times_s):
        after = np.maximum(times_s - begin_s, 0.0)
        half = 0.5 * spin_rad_s * after
        turn = np.stack((np.zeros_like(half), np.zeros_like(half), np.sin(half), np.cos(half)), axis=1)
        place = np.zeros((len(times_s), 3))
        place[:, 0] = speed_m_s * after
        return place, turn

    return motion


@pytest.mark.parametrize(("spin", "speed"), [(5.0, 0.0), (1.0, 2.0), (0.0, 3.0)])
def test_few_poses_do_for_every_sample(make, spin, speed):
    modes = make.modes([700.0, 4000.0, 15000.0], [1.5, 0.8, 0.3])
    segments = make.struck(modes, times_s=(0.1,))
    mic = np.array([0.4, 0.9, 0.2])
    scene = make.scene(tuple(mic), length_s="0.5")
    motion = turning(spin, 0.1005, speed)
    track = make.track(modes, segments, free=True, motion=motion)
    transfer = Still(modes)
    got = render(SimpleNamespace(bodies=(track,)), [transfer], scene).pressure_pa[:, 0]
    # Each mode alone without directivity, times its weight at each sample.
    times = np.arange(len(got)) / 48000
    place, turn = motion(times)
    angle = 2.0 * np.arctan2(turn[:, 2], turn[:, 3])
    away = mic - place
    along = np.cos(angle) * away[:, 0] + np.sin(angle) * away[:, 1]
    across = -np.sin(angle) * away[:, 0] + np.cos(angle) * away[:, 1]
    weights = transfer.every(np.stack((along, across, away[:, 2]), axis=1))
    exact = np.zeros_like(got)
    for mode in range(3):
        alone = make.flat(modes, scale=np.eye(3)[mode] * np.linalg.norm(mic))
        still = make.track(modes, segments)
        exact += weights[mode] * render(SimpleNamespace(bodies=(still,)), [alone], scene).pressure_pa[:, 0]
    # 0.3 % of the sum of amplitudes, which the peak does not quite reach.
    np.testing.assert_allclose(got, exact, atol=5e-3 * np.max(np.abs(exact)))
    # Without following the motion it would be far off.
    held = render(SimpleNamespace(bodies=(make.track(modes, segments),)), [transfer], scene).pressure_pa[:, 0]
    assert np.max(np.abs(held - exact)) > 10.0 * np.max(np.abs(got - exact))


def test_rest_before_the_strike_needs_two_knots(make):
    modes = make.modes([700.0, 4000.0], 1.0)
    track = make.track(modes, make.struck(modes, times_s=(0.3,)), free=True, motion=turning(4.0, 0.3))
    seen = facing(
        track,
        np.array([1.0, 0.0, 0.0]),
        span_s=(0.0, 0.5),
        sharp_s=0.15 / SPEED,
        weigh=lambda away: np.ones(2, dtype=complex),
    )
    assert np.sum(seen.knots_s < 0.2999) == 1
    # The strike and its end are knots, and corners.
    np.testing.assert_allclose(seen.knots_s[list(seen.breaks)], [0.0, 0.3, 0.301, 0.5], atol=1e-12)
    assert seen.count > 6


def test_shares_are_an_interpolation():
    knots = np.array([0.0, 0.1, 0.25, 0.3, 0.45, 0.7])
    seen = Facing(knots, np.ones((6, 3)), (0, 2, 5))
    times = np.linspace(-0.1, 0.8, 91)
    for knot in range(5):
        inside = times[(times >= knots[knot]) & (times <= knots[knot + 1])]
        stencil = list(seen.stencil(knot))
        shares = seen.shares(knot, inside)
        np.testing.assert_allclose(np.sum(shares, axis=1), 1.0, rtol=1e-12)
        # Exact for polynomials up to the number of knots, which stay on one side of the break at knot 2.
        power = len(stencil) - 1
        np.testing.assert_allclose(shares @ knots[stencil] ** power, inside**power, atol=1e-12)
        assert (max(stencil) <= 2) == (knot < 2)
    np.testing.assert_array_equal(seen.cells(np.array([-1.0, 0.12, 9.0])), [0, 1, 4])
