"""Which shapes are shown, how large and how slow."""

from __future__ import annotations

import numpy as np
import pytest

from resonate.motion.visible import (
    MOST_GAIN,
    body_size_m,
    fold,
    peak_displacement_m,
    peak_stretch,
    readable_gain,
    strongest,
    surface_shapes,
    swings,
)


def test_strongest_are_by_displacement_in_order_of_frequency():
    peak_m = np.array([1e-6, 5e-6, 0.0, 4e-6, 9e-6, 1e-13])
    np.testing.assert_array_equal(strongest(peak_m, most=3), [1, 3, 4])
    # rounding (1e-13 against 9e-6) and silence are no shapes
    np.testing.assert_array_equal(strongest(peak_m, most=8), [0, 1, 3, 4])
    assert len(strongest(np.zeros(4), most=8)) == 0
    assert len(strongest(peak_m, most=0)) == 0


@pytest.mark.parametrize("rate_hz", [24000 / 1001, 25.0, 60.0])
def test_fold_keeps_order_and_stays_between_its_limits(rate_hz):
    frequency_hz = np.geomspace(31.0, 80e3, 4000)
    shown = fold(frequency_hz, lowest_hz=31.0, frame_rate_hz=rate_hz)
    assert np.all(np.diff(shown) > 0.0)
    assert shown[0] == pytest.approx(0.05 * rate_hz, rel=1e-12)
    assert shown[-1] < 0.2 * rate_hz


def test_rigid_and_slow_is_a_swing_bending_or_fast_is_not(kit):
    points = kit.Bar().surface.points_m
    sway = np.zeros_like(points)
    sway[:, 2] = 3.0
    rock = np.cross([0.0, 0.0, 2.0], points - [0.4, 0.1, 0.0])
    bend = np.zeros_like(points)
    bend[:, 1] = np.sin(np.pi * points[:, 0] / 0.3)
    shapes = np.stack([sway, rock, bend, sway, np.zeros_like(points)], axis=2)
    found = swings(shapes, points, np.array([0.5, 4.7, 2.0, 4.9, 1.0]), frame_rate_hz=24.0)
    # 0.2 of 24 frames per second is 4.8 Hz
    np.testing.assert_array_equal(found, [True, True, False, False, False])


def test_peak_over_all_points_and_times_equals_exhaustive_search():
    rng = np.random.default_rng(5)
    shapes, weights = rng.normal(size=(40, 3, 4)), rng.normal(size=(300, 4))
    moved = np.einsum("nck,tk->tnc", shapes, weights)
    expected = np.max(np.linalg.norm(moved, axis=2))
    assert peak_displacement_m(shapes, weights, most_evaluations=300) == pytest.approx(expected, rel=1e-12)


def test_stretch_of_a_known_shear(kit):
    surface = kit.Bar().surface
    shapes = np.zeros((*surface.points_m.shape, 1))
    shapes[:, 1, 0] = surface.points_m[:, 0]  # every edge along x moves by its own length across
    assert peak_stretch(shapes, np.array([[0.1], [-0.3], [0.2]]), surface) == pytest.approx(0.3, rel=1e-12)


def test_gain_reaches_the_target_and_its_limits():
    def gain(peak_m, stretch, *, enlarge_only=True):
        return readable_gain(peak_m, stretch, target_m=3e-3, enlarge_only=enlarge_only)

    assert gain(1e-5, 1e-4) == pytest.approx(300.0)
    assert gain(1e-5, 1e-2) == pytest.approx(50.0)  # half of the distance of neighbours
    assert gain(1e-12, 1e-12) == MOST_GAIN
    assert gain(6e-3, 1e-3) == 1.0
    assert gain(6e-3, 1e-3, enlarge_only=False) == pytest.approx(0.5)
    assert gain(0.0, 0.0) == 1.0


def test_surface_shapes_follow_the_probe(kit):
    bar = kit.Bar(stations=5)
    modes = bar.modes([100.0, 400.0], [1.0, 1.0], rigid=np.ones((5, 1)))
    shapes = surface_shapes(bar, modes)
    station = np.rint(bar.surface.points_m[:, 0] / 0.3 * 4).astype(int)
    np.testing.assert_allclose(shapes[:, 1, :], modes.shape[station])
    assert np.all(shapes[:, [0, 2], :] == 0.0)
    assert body_size_m(bar.surface) == pytest.approx(0.3)
