"""Frame-time curves of a synthetic struck bar against its closed form."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest

from resonate.errors import RunError
from resonate.motion.curves import curves, same_hemisphere
from resonate.motion.shutter import displacement, shutter_mean

FREQUENCY_HZ = np.array([212.0, 848.0, 1908.0, 3392.0, 5300.0, 7632.0])
DECAY = np.array([2.0, 3.0, 5.0, 8.0, 13.0, 20.0])
HIT_S, AGAIN_S = 0.2137, 0.9021


@pytest.fixture
def bar(kit):
    return kit.Bar()


@pytest.fixture
def track(kit, bar):
    modes = bar.modes(FREQUENCY_HZ, DECAY)
    gains = -modes.shape[12]  # pushed down at station 12
    return kit.Track(
        modes,
        [
            (HIT_S, 1 / 192e3, kit.half_sine(300.0, 20), gains),
            (AGAIN_S, 1 / 192e3, kit.half_sine(90.0, 26), gains),
        ],
    )


def moved(body, weights):
    return np.einsum("kni,k->ni", body.targets, weights)


def make(kit, track, bar, **options):
    scene = kit.scene(**options)
    return curves(kit.record(track), [bar], scene), scene


@pytest.mark.parametrize("rate", [Fraction(24000, 1001), Fraction(25), Fraction(30000, 1001), Fraction(60)])
def test_frames_are_the_exact_rational_times(kit, track, bar, rate):
    made, _ = make(kit, track, bar, rate=rate, frames=200)
    expected = [float(k / rate) for k in range(200)]
    np.testing.assert_array_equal(made.times_s, expected)
    np.testing.assert_array_equal(made.key_times_s[made.frame_keys], expected)
    assert np.all(np.diff(made.key_times_s) > 0.0)


def test_every_contact_has_a_key_at_its_exact_begin(kit, track, bar):
    made, scene = make(kit, track, bar)
    extra = np.setdiff1d(made.key_times_s, made.times_s)
    begin = float(scene.clock.begin)
    np.testing.assert_array_equal(extra, [HIT_S - begin, AGAIN_S - begin])


def test_camera_view_is_the_shutter_mean_at_true_size(kit, track, bar):
    made, scene = make(kit, track, bar, ring="true", most=3)
    body = made.bodies[0]
    assert body.gain == 1.0
    assert not body.exaggerated
    times = np.array([float(scene.clock.frame_time(k)) for k in range(48)])
    mean = shutter_mean(track, times, shutter_s=1 / 48)
    for k, number in enumerate(body.mode_numbers):
        expected = (
            mean[number - 1][:, None]
            * bar.probe(bar.surface.points_m)
            .toarray()
            .dot(track.modes.shape[:, number - 1])
            .reshape(-1, 3)[:, 1]
        )
        shown = body.weights[:, k][:, None] * body.targets[k][:, 1]
        np.testing.assert_allclose(shown, expected, atol=1e-12 * np.max(np.abs(expected)))


def test_readable_ring_is_one_percent_of_the_size_and_says_so(kit, track, bar):
    body = make(kit, track, bar)[0].bodies[0]
    largest = max(np.max(np.linalg.norm(moved(body, w), axis=1)) for w in body.key_weights)
    assert largest == pytest.approx(0.01 * 0.3, rel=1e-9)
    assert body.exaggerated
    assert "EXAGGERATED" in body.note
    assert f"{body.gain:.6g}" in body.note
    asked = make(kit, track, bar, size=0.004)[0].bodies[0]
    assert asked.gain == pytest.approx(0.4 * body.gain, rel=1e-9)


def test_readable_ring_keeps_onset_sign_envelope_and_order(kit, track, bar):
    made, scene = make(kit, track, bar, frames=60)
    body = made.bodies[0]
    begin = float(scene.clock.begin)
    before = made.key_times_s <= HIT_S - begin
    assert np.all(body.key_weights[before] == 0.0)
    # The bar is pushed down: the first frame after the hit shows the struck station below its rest.
    first = np.flatnonzero(made.times_s > HIT_S - begin)[0]
    struck = 4 * 12
    assert moved(body, body.weights[first])[struck, 1] < 0.0
    # Frequencies in order and within a twentieth to a fifth of the frame rate.
    assert np.all(np.diff(body.shown_hz) > 0.0)
    assert body.shown_hz[0] >= 0.05 * 24
    assert body.shown_hz[-1] <= 0.2 * 24
    # Each curve is |z|/wd times a sine that starts with the phase at the end of the hit.
    hit_end, again = HIT_S + 20 / 192e3, AGAIN_S
    times = np.array([float(scene.clock.frame_time(k)) for k in range(60)])
    between = (times > hit_end) & (times < again)
    for k, number in enumerate(body.mode_numbers):
        speed = np.sqrt(track.modes.omega[number - 1] ** 2 - DECAY[number - 1] ** 2)
        at_hit = track.modal(np.array([hit_end]))[number - 1, 0]
        since = times[between] - hit_end
        expected = np.abs(at_hit) * np.exp(-DECAY[number - 1] * since) / speed
        expected *= np.sin(2 * np.pi * body.shown_hz[k] * since + np.angle(at_hit))
        reach = np.max(np.abs(track.modes.shape[:, number - 1]))
        np.testing.assert_allclose(
            np.abs(body.amplitude_m[between, k]), np.abs(expected) * reach * body.gain, rtol=1e-7, atol=1e-12
        )


def test_weights_stay_between_minus_one_and_one_and_reach_it(kit, track, bar):
    for ring in ("true", "readable"):
        body = make(kit, track, bar, ring=ring)[0].bodies[0]
        np.testing.assert_array_equal(np.max(np.abs(body.key_weights), axis=0), 1.0)
        assert np.all(np.abs(body.weights) <= 1.0)


def test_most_limits_the_shapes_and_off_shows_none(kit, track, bar):
    assert make(kit, track, bar, most=2)[0].bodies[0].weights.shape == (48, 2)
    body = make(kit, track, bar, ring="off")[0].bodies[0]
    assert body.weights.shape == (48, 0)
    assert body.targets.shape == (0, len(bar.surface.points_m), 3)
    assert body.scale_m.shape == (0,)
    assert body.amplitude_m.shape == (48, 0)
    assert np.any(body.unresolved_m > 0.0)  # the ring is there, only not drawn


def test_unresolved_amplitude_is_the_rms_over_a_period(kit, bar):
    # One mode, sampled densely over one period around a frame: the root mean square of the
    # displacement of its farthest point is what the channel says.
    modes = bar.modes([440.0], [1e-9])
    track = kit.Track(modes, [(0.1, 1e-5, np.full(3, 50.0), modes.shape[10])])
    body = curves(kit.record(track), [bar], kit.scene()).bodies[0]
    dense = 0.5 + np.arange(4096) / 4096 / 440.0
    q = displacement(track.modal(dense), modes.omega, modes.decay.total)[0]
    expected = np.sqrt(np.mean(q**2)) * np.max(np.abs(modes.shape[:, 0]))
    np.testing.assert_allclose(body.unresolved_m[-20:], expected, rtol=1e-6)
    assert body.unresolved_m[0] == 0.0


def test_modes_that_frames_resolve_are_not_unresolved(kit, bar):
    modes = bar.modes([11.9], [0.1])  # half of 24 frames per second is 12 Hz
    track = kit.Track(modes, [(0.1, 1e-5, np.full(3, 50.0), modes.shape[10])])
    assert np.all(curves(kit.record(track), [bar], kit.scene()).bodies[0].unresolved_m == 0.0)


def test_force_peak_belongs_to_the_frame_in_which_it_acts(kit, track, bar):
    made, scene = make(kit, track, bar)
    frame = int(np.floor((HIT_S - float(scene.clock.begin)) * 24))
    again = int(np.floor((AGAIN_S - float(scene.clock.begin)) * 24))
    force = made.bodies[0].force_peak_n
    np.testing.assert_array_equal(np.flatnonzero(force), [frame, again])
    assert force[frame] == pytest.approx(np.max(kit.half_sine(300.0, 20)))


def test_a_hung_body_swings_as_it_is(kit, bar):
    # Mode 1 carries the bar about at 0.7 Hz; mode 2 rings.
    shape = np.column_stack([np.full(bar.stations, 2.0), np.sin(np.pi * bar.x / 0.3)])
    modes = kit.modes([0.7, 300.0], [0.05, 3.0], shape=shape)
    track = kit.Track(modes, [(0.1, 1e-4, np.full(10, 50.0), shape[20])])
    scene = kit.scene()
    body = curves(kit.record(track), [bar], scene).bodies[0]
    assert body.kinds == ("ring", "swing")
    assert body.labels == ("mode_2", "mode_1")
    np.testing.assert_array_equal(body.mode_numbers, [2, 1])
    np.testing.assert_array_equal(body.gains[1:], 1.0)
    assert body.gain > 1.0
    times = np.array([float(scene.clock.frame_time(k)) for k in range(48)])
    swing = displacement(track.modal(times), modes.omega, modes.decay.total)[0] * 2.0
    np.testing.assert_allclose(np.abs(body.amplitude_m[:, 1]), np.abs(swing), rtol=1e-9, atol=1e-15)


def test_poses_are_instantaneous_and_in_one_hemisphere(kit, bar):
    modes = bar.modes([300.0], [3.0])
    track = kit.Track(modes, [], free=True, speed_m_s=(0.1, -0.4, 0.0), spin_rad_s=23.0)
    made = curves(kit.record(track), [bar], kit.scene(frames=100))
    body = made.bodies[0]
    begin = -8 / 24
    np.testing.assert_allclose(body.place_m[:, 1], -0.4 * (made.times_s + begin + 0.02), atol=1e-12)
    half = 0.5 * 23.0 * (made.times_s + begin + 0.02)
    direct = np.stack([0 * half, 0 * half, np.sin(half), np.cos(half)], axis=1)
    np.testing.assert_allclose(np.abs(np.sum(body.turn * direct, axis=1)), 1.0, atol=1e-12)
    assert np.all(np.sum(body.turn[1:] * body.turn[:-1], axis=1) >= 0.0)
    np.testing.assert_array_equal(body.key_turn[made.frame_keys], body.turn)


def test_same_hemisphere_undoes_sign_flips():
    turn = np.array(
        [[0.0, 0.0, 0.0, 1.0], [0.1, 0.0, 0.0, -0.99], [0.2, 0.0, 0.0, 0.9], [-0.3, 0.0, 0.0, 0.9]]
    )
    expected = turn * np.array([1.0, -1.0, 1.0, 1.0])[:, None]
    np.testing.assert_array_equal(same_hemisphere(turn), expected)


def test_mesh_has_its_origin_at_the_mass_centre(kit, track, bar):
    mesh = make(kit, track, bar)[0].bodies[0].mesh
    assert np.min(mesh.points_m[:, 0]) == pytest.approx(-0.15)
    assert np.max(mesh.points_m[:, 0]) == pytest.approx(0.15)


def test_arrays_are_read_only(kit, track, bar):
    made, _ = make(kit, track, bar)
    with pytest.raises(ValueError, match="read-only"):
        made.bodies[0].weights[0, 0] = 2.0


def test_silence_shows_no_shape(kit, bar):
    body = curves(kit.record(kit.Track(bar.modes([300.0], [3.0]), [])), [bar], kit.scene()).bodies[0]
    assert body.weights.shape == (48, 0)
    assert body.note == "no vibration is shown"


def test_tracks_of_another_scene_are_refused(kit, track, bar):
    with pytest.raises(RunError, match="1 tracks, 2 bodies, 1 in the scene"):
        curves(kit.record(track), [bar, bar], kit.scene())


def test_a_contact_that_begins_with_a_frame_adds_no_double_key(kit, bar):
    modes = bar.modes([300.0], [3.0])
    for frame in range(48):
        begin = float(Fraction(frame - 8) / Fraction(24000, 1001))
        for hit in (begin, np.nextafter(begin, 9.0), np.nextafter(begin, -9.0)):
            track = kit.Track(modes, [(hit, 1e-4, np.full(2, 5.0), [1.0])], begin_s=-1.0)
            made = curves(kit.record(track), [bar], kit.scene(rate=Fraction(24000, 1001)))
            assert np.all(np.diff(made.key_times_s) > 0.0)
            assert len(made.frame_keys) == 48


def test_two_runs_give_the_same_bits(kit, track, bar):
    first, second = (make(kit, track, bar)[0].bodies[0] for _ in range(2))
    assert first.key_weights.tobytes() == second.key_weights.tobytes()
    assert first.targets.tobytes() == second.targets.tobytes()


def test_a_body_without_modes_still_moves(kit, bar):
    track = kit.Track(
        bar.modes([], []), [(0.1, 1e-4, np.full(4, 7.0), [])], free=True, speed_m_s=(0.5, 0.0, 0.0)
    )
    body = curves(kit.record(track), [bar], kit.scene(ring="true")).bodies[0]
    assert body.weights.shape == (48, 0)
    assert np.max(body.force_peak_n) == 7.0
    assert body.place_m[-1, 0] > 0.5
