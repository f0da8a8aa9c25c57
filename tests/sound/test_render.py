"""Rendering: exact in time, no aliasing, no step between ringing and contact."""

from __future__ import annotations

from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from threadpoolctl import threadpool_limits

from resonate.errors import ResonateError
from resonate.run.record import Segment
from resonate.sound import render as rendering
from resonate.sound.filter import band_limit
from resonate.sound.hearing import arrivals_s
from resonate.sound.render import Sound, render

SPEED = 343.2


def record_of(*tracks):
    return SimpleNamespace(bodies=tracks)


@pytest.fixture
def rope(make):
    """Many modes from 100 Hz to 30 kHz and their gains."""
    generator = np.random.default_rng(3)
    modes = make.modes(np.sort(generator.uniform(100.0, 30e3, 120)), generator.uniform(0.1, 2.0, 120))
    return SimpleNamespace(modes=modes, gains=generator.normal(size=120))


def acceleration(make, modes, segments, times_s):
    """Sum of the accelerations of the heard modes at any times, straight from the segments."""
    lam = make.exponent(modes)[: modes.heard]
    turn = 1.0 - 1j * lam.real / lam.imag
    out = np.zeros(len(times_s))
    for place, segment in enumerate(segments):
        until = segments[place + 1].begin_s if place + 1 < len(segments) else np.inf
        inside = np.flatnonzero((times_s >= segment.begin_s) & (times_s < until))
        state = segment.z[: modes.heard]
        if not segment.is_contact:
            grown = np.exp(lam * (times_s[inside, None] - segment.begin_s))
            out[inside] = (grown @ (turn * lam * state)).real
            continue
        steps = np.floor((times_s[inside] - segment.begin_s) / segment.step_s).astype(int)
        for step, force in enumerate(segment.force_n[0]):
            drive = lam * state + segment.rows[0, : modes.heard] * force
            here = inside[steps == step]
            rest = times_s[here, None] - (segment.begin_s + step * segment.step_s)
            out[here] = (np.exp(lam * rest) @ (turn * drive)).real
            state = state + np.expm1(lam * segment.step_s) / lam * drive
    return out


def test_is_the_convolution_of_the_acceleration_with_the_kernel(make, rope):
    segments = make.struck(rope.modes, gains=rope.gains)
    scene = make.scene((0.0, 0.0, 1.0), length_s="0.15")
    got = render(record_of(make.track(rope.modes, segments)), [make.flat(rope.modes)], scene).pressure_pa[
        :, 0
    ]
    limit = band_limit(48000, heard_hz=20e3)
    fine = 1.0 / 192000 / 16
    for sample in (4770, 4795, 4805, 4820, 4850, 4890, 5200):
        # Midpoints of a fine grid that keeps step with the contact.
        first = np.floor((sample / 48000 - limit.half_s - 0.1) / fine)
        times = 0.1 + fine * (first + 0.5 + np.arange(int(2.0 * limit.half_s / fine) + 2))
        plain = fine * np.sum(
            limit.kernel(sample / 48000 - times) * acceleration(make, rope.modes, segments, times)
        )
        # Midpoint rule: (2 pi 48 kHz * fine)^2 / 24 of the envelope of the integrand, some 1e-4 of it.
        np.testing.assert_allclose(got[sample], plain, atol=1e-5 * np.max(np.abs(got)))


def test_one_mode_obeys_its_equation_of_motion(make):
    # q'' + 2 a q' + w^2 q = F(t) by a general integrator (scipy solve_ivp); all of it lies far below 20 kHz.
    modes = make.modes([500.0], 0.3)
    omega, decay = modes.omega[0], modes.decay.total[0]
    segments = make.struck(modes, length_s=2e-3, peak_n=3.0)
    scene = make.scene((0.0, 0.0, 2.0), length_s="0.125")
    got = render(record_of(make.track(modes, segments)), [make.flat(modes)], scene).pressure_pa[:, 0]

    def force(time):
        return 3.0 * np.sin(np.pi * (time - 0.1) / 2e-3) * ((time >= 0.1) & (time <= 0.102))

    def slope(time, state):
        return [state[1], force(time) - 2.0 * decay * state[1] - omega**2 * state[0]]

    times = np.arange(4800, 6000) / 48000
    state = solve_ivp(
        slope, (0.1, times[-1]), [0.0, 0.0], t_eval=times, rtol=1e-10, atol=1e-14, max_step=1e-4
    ).y
    exact = 0.5 * (force(times) - 2.0 * decay * state[1] - omega**2 * state[0])
    # The force is held over 1/192000 s: (pi / 384)^2 / 24 = 3e-6. Around its corners at 0.1 and 0.102 s
    # the band limit rounds it off by up to 1 %.
    clear = np.minimum(np.abs(times - 0.1), np.abs(times - 0.102)) > 5e-4
    np.testing.assert_allclose(got[4800:][clear], exact[clear], atol=1e-4 * np.max(np.abs(exact)))
    np.testing.assert_allclose(got[4800:], exact, atol=1e-2 * np.max(np.abs(exact)))


@pytest.mark.parametrize("rate", [44100, 48000, 96000])
def test_ringing_and_windows_meet_without_a_step(make, rope, rate, monkeypatch):
    # A contact without force in the middle of a ring is rendered by quadrature there, and by the closed
    # form without it.
    monkeypatch.setattr(rendering, "TOLERANCE", 0.0)
    plain = make.struck(rope.modes, gains=rope.gains)
    lam, last = make.exponent(rope.modes), plain[-1]
    begin, step, count = 0.15, 1.0 / 192000, 200
    before = last.z * np.exp(lam * (begin - last.begin_s))
    window = Segment(
        begin_s=begin, z=before, rigid=None, step_s=step, force_n=np.zeros((1, count)), rows=np.ones((1, len(lam))),
        contacts=(0,),
    )  # fmt: skip
    after = Segment(begin_s=begin + count * step, z=before * np.exp(lam * count * step), rigid=None)
    scene = make.scene((0.0, 0.0, 1.0), (0.0, 0.0, 2.3), rate_hz=rate, length_s="0.25")
    one, two = (
        render(record_of(make.track(rope.modes, each)), [make.flat(rope.modes)], scene).pressure_pa
        for each in (plain, (*plain, window, after))
    )
    np.testing.assert_allclose(two, one, atol=1e-11 * np.max(np.abs(one)))


def test_contact_rate_does_not_matter(make, rope):
    # The same force, held over steps of 1/192000 s or over four parts of each.
    scene = make.scene((0.0, 0.0, 1.0), length_s="0.2")
    one, two = (
        render(
            record_of(make.track(rope.modes, make.struck(rope.modes, gains=rope.gains, parts=parts))),
            [make.flat(rope.modes)],
            scene,
        ).pressure_pa
        for parts in (1, 4)
    )
    np.testing.assert_allclose(two, one, atol=1e-11 * np.max(np.abs(one)))


@pytest.mark.parametrize("rate", [44100, 48000])
def test_no_aliases_below_20_khz(make, rate):
    # Modes above the stop edge, hit hard enough by a 50 us pulse; a rate four times as high holds them all.
    frequency = np.array([440.0, 2500.0, 9000.0, 19000.0, 29500.0, 33000.0, 38000.0])
    modes = make.modes(frequency, 0.05, heard_hz=40e3)
    segments = make.struck(modes, length_s=5e-5, step_s=1 / 1536000, times_s=(0.05003,))
    spectra = []
    for each in (rate, 4 * rate):
        scene = make.scene((0.0, 0.0, 1.0), rate_hz=each, length_s="0.25")
        sound = render(record_of(make.track(modes, segments)), [make.flat(modes)], scene)
        spectra.append(np.fft.rfft(sound.pressure_pa[:, 0]) / each)
    below = np.arange(len(spectra[0])) * 4.0 <= 20e3
    low, high = spectra[0][below], spectra[1][: len(spectra[0])][below]
    # The pulse reaches that high: modes above 29 kHz stand within 40 dB of the rest at the high rate.
    upper = np.abs(spectra[1])[int(29e3 / 4) : int(39e3 / 4)]
    assert np.max(upper) > 0.01 * np.max(np.abs(high))
    assert np.max(np.abs(low - high)) < 1e-5 * np.max(np.abs(high))


# T60 = 13.8155 / (eta w) = ln(1000) / (eta w / 2) (Cremer & Heckl, Structure-Borne Sound): f, eta, T60.
DECAYS = [(440.0, 1e-3, 4.99728817), (2000.0, 1e-4, 10.994034), (250.0, 0.02, 0.439761359)]


@pytest.mark.parametrize(("frequency", "eta", "t60"), DECAYS)
def test_decay_time_of_the_rendered_sound(make, frequency, eta, t60):
    rate = 0.5 * eta * 2.0 * np.pi * frequency
    modes = make.modes([frequency], np.log(1000.0) / rate)
    scene = make.scene((0.0, 0.0, 1.0), length_s="1.2")
    sound = render(record_of(make.track(modes, make.struck(modes))), [make.flat(modes)], scene)
    # Level of whole periods, 0.25 s apart in their middles.
    first, last = (np.mean(sound.pressure_pa[begin : begin + 2400, 0] ** 2) for begin in (12000, 36000))
    measured = 60.0 * 0.5 / (10.0 * np.log10(first / last))
    np.testing.assert_allclose(measured, t60, rtol=5e-3)


def test_waveform_and_record_are_in_step(make, rope):
    # Cross-correlation with the accelerations sampled at the delivery times, no filter.
    scene = make.scene((0.0, 0.0, 1.0), length_s="0.4")
    segments = make.struck(rope.modes, gains=rope.gains, times_s=(0.1000123,))
    got = render(record_of(make.track(rope.modes, segments)), [make.flat(rope.modes)], scene).pressure_pa[
        :, 0
    ]
    bare = acceleration(make, rope.modes, segments, np.arange(len(got)) / 48000)
    assert abs(lag_of(got, bare)) < 0.01


def lag_of(late, early):
    """Lag in samples at the top of the cross-correlation, by parabola on a 16-fold grid."""
    size = 2 * len(late)
    cross = np.fft.rfft(late, size) * np.conj(np.fft.rfft(early, size))
    fine = np.fft.irfft(cross, 16 * size)
    top = int(np.argmax(fine))
    left, middle, right = fine[top - 1], fine[top], fine[(top + 1) % len(fine)]
    top = top - len(fine) if top > len(fine) // 2 else top
    return (top + 0.5 * (left - right) / (left - 2.0 * middle + right)) / 16


def test_two_microphones_differ_by_distance_and_time(make, rope):
    # 100 whole samples and 37.4 samples of extra path; 1 / r.
    segments = make.struck(rope.modes, gains=rope.gains)
    far = [1.0 + SPEED * samples / 48000 for samples in (100.0, 37.4)]
    scene = make.scene((0.0, 0.0, 1.0), *((0.0, 0.0, r) for r in far), length_s="0.4")
    sound = render(record_of(make.track(rope.modes, segments)), [make.flat(rope.modes)], scene).pressure_pa
    np.testing.assert_allclose(sound[100:, 1] * far[0], sound[:-100, 0], atol=1e-9 * np.max(np.abs(sound)))
    np.testing.assert_allclose(lag_of(sound[:, 2], sound[:, 0]), 37.4, atol=1e-3)
    np.testing.assert_allclose(np.max(np.abs(sound[:, 2])) * far[1], np.max(np.abs(sound[:, 0])), rtol=0.05)


def test_delay_keeps_the_travelling_time(make, rope):
    segments = make.struck(rope.modes, gains=rope.gains)
    distance = SPEED * 240 / 48000
    near, kept = (
        render(
            record_of(make.track(rope.modes, segments)),
            [make.flat(rope.modes)],
            make.scene((0.0, distance, 0.0), length_s="0.3", delay=delay),
        ).pressure_pa[:, 0]
        for delay in (False, True)
    )
    np.testing.assert_allclose(kept[240:], near[:-240], atol=1e-9 * np.max(np.abs(near)))


def test_arrivals_are_distances_over_the_speed_of_sound(make):
    # Time of flight over 10 m at 343.2 m/s: 29.1375291 ms.
    modes = make.modes([300.0], 0.5)
    tracks = [make.track(modes, make.struck(modes), place_m=(x, 0.0, 0.0)) for x in (0.0, 4.0)]
    places = (10.0, 0.0, 0.0), (0.0, 0.0, 6.0)
    kept = arrivals_s(tracks, make.scene(*places, delay=True))
    np.testing.assert_allclose(kept[0, 0], 29.1375291e-3, rtol=1e-8)
    np.testing.assert_allclose(kept * SPEED, [[10.0, 6.0], [6.0, np.sqrt(52.0)]], rtol=1e-12)
    cut = arrivals_s(tracks, make.scene(*places))
    np.testing.assert_allclose(cut, kept - kept.min(), atol=1e-15)


def test_two_bodies_add_up(make, rope):
    other = make.modes([300.0, 1700.0], 0.5)
    tracks = (
        make.track(rope.modes, make.struck(rope.modes, gains=rope.gains)),
        make.track(other, make.struck(other, times_s=(0.13,)), place_m=(0.4, 0.0, 0.0)),
    )
    transfers = [make.flat(rope.modes), make.flat(other)]
    scene = make.scene((0.0, 0.0, 1.0), length_s="0.3", delay=True)
    both = render(record_of(*tracks), transfers, scene).pressure_pa
    parts = [
        render(record_of(track), [transfer], scene).pressure_pa
        for track, transfer in zip(tracks, transfers, strict=True)
    ]
    np.testing.assert_allclose(both, parts[0] + parts[1], atol=1e-9 * np.max(np.abs(both)))


def test_handles_move_the_first_sample_back(make, rope):
    segments = make.struck(rope.modes, gains=rope.gains, begin_s=-1.0)
    track = make.track(rope.modes, segments)
    plain, with_handles = (
        render(
            record_of(track),
            [make.flat(rope.modes)],
            make.scene((0.0, 0.0, 1.0), length_s="0.25", handles=handles),
        ).pressure_pa
        for handles in (0, 6)
    )
    # Six frames at 24 a second are 12000 samples.
    np.testing.assert_allclose(with_handles[12000:24000], plain, atol=1e-9 * np.max(np.abs(plain)))


def test_late_in_a_take_time_is_as_exact_as_early(make):
    modes = make.modes([3000.0, 15000.0], 0.05)
    sounds = []
    for whole in (0, 60):
        segments = make.struck(modes, times_s=(whole + 0.125,))
        scene = make.scene((0.0, 0.0, 1.0), length_s=str(whole + 0.25), rate_hz=44100)
        sound = render(record_of(make.track(modes, segments)), [make.flat(modes)], scene)
        sounds.append(sound.pressure_pa[whole * 44100 :])
    # Begin of the ring after the contact: 60 s is known to 7e-15 s, 2 pi 15 kHz times that is 7e-10.
    np.testing.assert_allclose(sounds[1], sounds[0], atol=2e-9 * np.max(np.abs(sounds[0])))


class Cardioid:
    """Weights that follow the direction in the body frame: 1 + x / distance."""

    radius_m = 0.3
    warnings = ()

    def weights(self, place_m, reference_m):
        distance = np.linalg.norm(place_m)
        return np.array([(1.0 + place_m[0] / distance) / distance + 0j])


def test_a_turning_body_is_heard_from_where_it_faces(make):
    spin = 7.0

    def motion(times_s):
        half = 0.5 * spin * times_s
        turn = np.stack((np.zeros_like(half), np.zeros_like(half), np.sin(half), np.cos(half)), axis=1)
        return np.zeros((len(times_s), 3)), turn

    modes = make.modes([1500.0], 2.0)
    segments = make.struck(modes, times_s=(0.05,))
    turning = make.track(modes, segments, free=True, motion=motion)
    still = make.track(modes, segments)
    scene = make.scene((2.0, 0.0, 0.0), length_s="0.5")
    got = render(record_of(turning), [Cardioid()], scene).pressure_pa[:, 0]
    flat = render(record_of(still), [make.flat(modes)], scene).pressure_pa[:, 0]
    times = np.arange(len(got)) / 48000
    # Linear between knots that turn by 0.25 / (k radius) = 0.03 rad: 0.03^2 / 8 = 1.1e-4.
    exact = flat * (1.0 + np.cos(spin * times))
    np.testing.assert_allclose(got, exact, atol=2e-4 * np.max(np.abs(exact)))


def test_a_body_that_does_not_move_has_one_pose(make):
    modes = make.modes([1500.0], 2.0)
    segments = make.struck(modes)
    scene = make.scene((2.0, 0.0, 0.0), length_s="0.3")
    free, held = (
        render(record_of(make.track(modes, segments, free=free)), [Cardioid()], scene).pressure_pa
        for free in (True, False)
    )
    np.testing.assert_array_equal(free, held)


def test_modes_above_the_heard_band_are_silent(make):
    modes = make.modes([1000.0, 9000.0], 1.0, heard_hz=5e3)
    alone = make.modes([1000.0], 1.0, heard_hz=5e3)
    scene = make.scene((0.0, 0.0, 1.0), length_s="0.2")
    both, one = (
        render(record_of(make.track(each, make.struck(each))), [make.flat(each)], scene).pressure_pa
        for each in (modes, alone)
    )
    np.testing.assert_allclose(both, one, atol=1e-12 * np.max(np.abs(one)))


def test_swings_of_the_whole_body_are_silent(make):
    modes = make.modes([2.0, 1000.0, 3000.0], 1.0)
    alone = make.modes([1000.0, 3000.0], 1.0)
    scene = make.scene((0.0, 0.0, 1.0), length_s="0.2")
    swinging, still = (
        render(record_of(make.track(each, make.struck(each))), [make.flat(each)], scene).pressure_pa
        for each in (replace(modes, swing=1), alone)
    )
    np.testing.assert_array_equal(swinging, still)


def test_a_body_nobody_touched_is_silent(make):
    modes = make.modes([1000.0], 1.0)
    still = make.track(modes, (Segment(begin_s=-0.02, z=np.zeros(1, dtype=complex), rigid=None),))
    scene = make.scene((0.0, 0.0, 1.0), length_s="0.125")
    sound = render(record_of(still), [make.flat(modes)], scene)
    np.testing.assert_array_equal(sound.pressure_pa, np.zeros((6000, 1)))
    assert sound.channel_names == ("mic 0",)


def test_a_contact_at_the_end_rings_on(make, rope):
    segments = make.struck(rope.modes, gains=rope.gains)
    scene = make.scene((0.0, 0.0, 1.0), length_s="0.25")
    whole, cut = (
        render(record_of(make.track(rope.modes, each)), [make.flat(rope.modes)], scene).pressure_pa
        for each in (segments, segments[:-1])
    )
    np.testing.assert_allclose(cut, whole, atol=1e-9 * np.max(np.abs(whole)))


def test_same_bits_with_one_and_two_threads(make, rope):
    segments = make.struck(rope.modes, gains=rope.gains, times_s=(0.1, 0.102, 0.2))
    scene = make.scene((0.0, 0.0, 1.0), (0.5, 0.0, 1.0), length_s="0.3")
    sounds = []
    for threads in (1, 2):
        with threadpool_limits(threads):
            sounds.append(render(record_of(make.track(rope.modes, segments)), [make.flat(rope.modes)], scene))
    np.testing.assert_array_equal(sounds[0].pressure_pa, sounds[1].pressure_pa)
    assert not sounds[0].pressure_pa.flags.writeable


def test_one_radiation_model_a_body(make, rope):
    track = make.track(rope.modes, make.struck(rope.modes))
    with pytest.raises(ResonateError, match="0 radiation models for 1 bodies"):
        render(record_of(track), [], make.scene((0.0, 0.0, 1.0)))


def test_channels_need_names():
    with pytest.raises(ResonateError, match="samples by channels"):
        Sound(np.zeros((4, 2)), 48000, ("one",))
