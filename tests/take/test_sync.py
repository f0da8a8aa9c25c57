"""Where a sound stands in time, on waves that are moved exactly: by the phase of their spectrum (the shift theorem)."""

from __future__ import annotations

import base64

import numpy as np
import pytest

from resonate.take.excerpt import excerpts_of
from resonate.take.sync import first_sound, fit_piece, onset_near

RATE = 48000


def moved(wave, samples):
    """A wave later by any part of a sample; it must be silent at its end."""
    turns = np.fft.rfftfreq(len(wave))
    return np.fft.irfft(np.fft.rfft(wave) * np.exp(-2j * np.pi * turns * samples), len(wave))


def blow(*, hertz, decay, begin=4000, count=16384, top=0.4):
    """Ringing from ``begin`` on, without anything above ``top`` of the rate."""
    since = (np.arange(count) - begin) / RATE
    ring = sum(np.sin(2.0 * np.pi * each * since) for each in hertz) * np.exp(-decay * np.maximum(since, 0.0))
    spectrum = np.fft.rfft(np.where(since >= 0.0, ring, 0.0))
    spectrum[np.fft.rfftfreq(count) > top] = 0.0
    return np.fft.irfft(spectrum, count)


@pytest.mark.parametrize("late", [0.0, 0.3, -0.4, 1.0, -2.75, 17.5, 4800.0, -3000.0])
@pytest.mark.parametrize("hertz", [(440.0, 1210.5, 5003.0), (60.0,), (9000.0, 15000.0)])
def test_a_piece_is_placed_to_a_small_part_of_a_sample(late, hertz):
    wave = blow(hertz=hertz, decay=40.0)
    piece = wave[3950 : 3950 + 480]
    fit = fit_piece(moved(wave, late), piece, begin=3950, reach=6000)
    assert fit.late == pytest.approx(late, abs=0.02)
    assert fit.likeness > 0.999


def test_a_piece_of_another_sound_does_not_fit():
    noise = np.random.default_rng(3).normal(size=16384)
    piece = blow(hertz=(440.0, 1210.5), decay=40.0)[3950:4430]
    assert fit_piece(noise, piece, begin=3950, reach=6000).likeness < 0.9
    assert fit_piece(np.zeros(9000), piece, begin=3950, reach=6000).likeness == 0.0


def test_a_blow_on_something_that_rings_is_found_by_its_high_frequencies():
    # The blow itself is 20 times fainter than what rings: its level alone does not show it.
    ringing = 20.0 * np.sin(2.0 * np.pi * 180.0 * np.arange(16384) / RATE)
    wave = ringing + blow(hertz=(7000.0, 11000.0), decay=200.0)
    found = onset_near(wave, rate_hz=RATE, expected_s=4000 / RATE, reach_s=0.02)
    assert found == pytest.approx(4000 / RATE, abs=5e-4)


@pytest.mark.parametrize("begin", [4000, 9600])
def test_the_first_sound_is_where_it_begins_also_when_it_is_faint(begin):
    wave = blow(hertz=(440.0, 1210.5), decay=20.0, begin=begin)
    # A second blow a thousand times as loud does not hide the first.
    wave[begin + 3000 :] += 500.0 * blow(hertz=(440.0,), decay=20.0, begin=begin + 3000)[begin + 3000 :]
    assert first_sound(wave, rate_hz=RATE, floor=0.0) == pytest.approx(begin / RATE, abs=5e-4)
    assert first_sound(np.zeros(100), rate_hz=RATE, floor=0.0) is None
    assert first_sound(np.full(100, 1e-7), rate_hz=RATE, floor=1e-6) is None


def test_excerpts_hold_the_pressure_at_the_arrivals_and_the_loudest_place():
    loud = blow(hertz=(440.0, 1210.5), decay=40.0)
    pressure = np.stack((loud, np.zeros_like(loud)), axis=1)
    arrivals = np.array([[4000 / RATE, 4000 / RATE], [9000 / RATE, 9000 / RATE], [-1.0, 99.0]])
    pieces = excerpts_of(pressure, arrivals, rate_hz=RATE, channels=("near", "null"))
    # Nothing of a silent channel, nothing outside the file.
    assert [(piece.channel, piece.sample) for piece in pieces] == [("near", 4000 - 72), ("near", 9000 - 72)]
    for piece in pieces:
        codes = np.frombuffer(base64.b64decode(piece.codes), "<i2")
        part = loud[piece.sample : piece.sample + 480]
        np.testing.assert_allclose(piece.unit_pa * codes, part, atol=0.5 * piece.unit_pa * (1.0 + 1e-9))
    late = np.argmax(np.abs(loud[6000:])) + 6000
    pieces = excerpts_of(np.where(np.arange(16384) < 6000, 0.0, loud)[:, None], np.zeros((0, 1)), rate_hz=RATE, channels=("near",))
    assert [piece.sample for piece in pieces] == [late]


def test_many_contacts_leave_few_excerpts():
    wave = np.random.default_rng(5).normal(size=(480000, 1))
    arrivals = np.linspace(0.1, 9.9, 300)[:, None]
    pieces = excerpts_of(wave, arrivals, rate_hz=RATE, channels=("near",))
    assert 10 <= len(pieces) <= 13
    assert pieces[0].sample < 5000
    assert pieces[-1].sample > 470000
