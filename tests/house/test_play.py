"""Audition: quiet at first, never above the ceiling, and clear words where no sound can come out."""

from __future__ import annotations

import json
import os
import shutil

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import array_shapes, arrays

from resonate.take.play import CEILING_DB, START_DB, guarded

CEILING = 10.0 ** (CEILING_DB / 20.0)
ANY = st.floats(allow_nan=True, allow_infinity=True, allow_subnormal=True, width=64)


@settings(max_examples=300, deadline=None)
@given(
    samples=arrays(np.float64, array_shapes(min_dims=2, max_dims=2, min_side=1, max_side=40), elements=ANY),
    rate_hz=st.sampled_from([8, 1000, 44100, 192000]),
    gain_db=st.floats(-60.0, 20.0),
)
def test_nothing_leaves_above_the_ceiling_and_everything_starts_in_silence(samples, rate_hz, gain_db):
    played = guarded(samples, rate_hz, gain_db=gain_db)
    assert played.shape == (samples.shape[0], min(2, samples.shape[1]))
    assert np.all(np.abs(played) <= CEILING)  # also: no sample that is not a number
    assert np.all(played[0] == 0.0)


@settings(max_examples=50, deadline=None)
@given(scale=st.floats(1e-300, 1e300), gain_db=st.floats(-60.0, 0.0))
def test_the_scale_of_a_sound_does_not_decide_how_loud_it_starts(scale, gain_db):
    tone = scale * np.sin(2.0 * np.pi * 440.0 * np.arange(48000) / 48000.0)[:, None]
    played = np.abs(guarded(tone, 48000, gain_db=gain_db))
    peak_db = 20.0 * np.log10(played.max())
    # The limiter bends the start level, 12 dB below the ceiling, by tanh(1/4) / (1/4): 0.18 dB.
    assert START_DB + gain_db - 0.2 < peak_db < START_DB + gain_db
    # 30 ms of fading in: in the first 3 ms not even a tenth.
    assert played[: int(0.003 * 48000)].max() <= 0.1 * played.max()


@settings(max_examples=50, deadline=None)
@given(softer=st.floats(-60.0, 20.0), louder=st.floats(-60.0, 20.0))
def test_more_gain_is_never_quieter(softer, louder):
    softer, louder = min(softer, louder), max(softer, louder)
    noise = np.random.default_rng(5).standard_normal((4000, 2))
    quiet, loud = (np.abs(guarded(noise, 48000, gain_db=gain)) for gain in (softer, louder))
    assert np.all(loud >= quiet * (1.0 - 1e-12))


def test_silence_and_nothing_are_played_as_such():
    assert not guarded(np.zeros((10, 1)), 48000, gain_db=20.0).any()
    assert guarded(np.zeros((0, 1)), 48000, gain_db=0.0).shape == (0, 1)


# Stand-ins for the sound system, put where the interpreter finds them first.
NO_LIBRARY = 'raise OSError("PortAudio library not found")\n'
NO_DEVICE = """
class PortAudioError(Exception): pass
def query_devices(*a, **k): raise PortAudioError("Error querying device -1")
"""
BUSY_DEVICE = """
class PortAudioError(Exception): pass
def query_devices(*a, **k): return {}
def play(*a, **k): raise PortAudioError("Invalid sample rate")
"""
RECORDER = """
import numpy, pathlib
class PortAudioError(Exception): pass
def query_devices(*a, **k): return {}
def play(samples, rate, blocking):
    numpy.save(pathlib.Path(__file__).with_name("played.npy"), samples)
    pathlib.Path(__file__).with_name("rate.txt").write_text(str(rate))
"""


@pytest.fixture
def speaker(shell):
    """Puts a stand-in in place and gives its folder."""

    def put(source):
        folder = shell.folder / "speaker"
        folder.mkdir(exist_ok=True)
        (folder / "sounddevice.py").write_text(source, encoding="utf-8")
        shell.environment["PYTHONPATH"] = f"{folder}{os.pathsep}{shell.environment['PYTHONPATH']}"
        return folder

    return put


@pytest.fixture
def take(shell, small):
    assert shell.run("take", small.name).code == 0
    return shell.folder / "Galley spoon"


def test_without_portaudio_it_says_what_to_install(shell, small, speaker):
    speaker(NO_LIBRARY)
    outcome = shell.run("play", small.name)
    assert outcome.code == 2
    assert "PortAudio library not found" in outcome.err
    assert "libportaudio2" in outcome.err
    assert "Traceback" not in outcome.err
    assert outcome.out == ""


@pytest.mark.parametrize(
    ("what", "said"), [("nothere", "no such take or scene"), ("nothere.toml", "no such take or scene"), (".", "no WAV")]
)
def test_what_is_not_there_is_told_before_the_machine_is_asked(shell, speaker, what, said):
    speaker(NO_LIBRARY)
    outcome = shell.run("play", what)
    assert outcome.code == 2
    assert said in outcome.err
    assert "PortAudio" not in outcome.err


@pytest.mark.parametrize(
    ("device", "said"), [(NO_DEVICE, "Error querying device"), (BUSY_DEVICE, "Invalid sample rate")]
)
def test_without_a_device_it_says_so(shell, small, speaker, device, said):
    speaker(device)
    outcome = shell.run("play", small.name)
    assert outcome.code == 2
    assert "no sound device" in outcome.err
    assert said in outcome.err
    assert "fix:" in outcome.err


def test_everything_but_playing_works_without_portaudio(shell, small, speaker):
    speaker(NO_LIBRARY)
    assert shell.run("take", small.name).code == 0
    assert shell.run("check", "Galley spoon").code == 0


def test_a_take_is_played_quietly_at_its_own_rate(shell, take, speaker):
    folder = speaker(RECORDER)
    outcome = shell.run("play", take.name)
    assert (outcome.code, outcome.out) == (0, "")
    assert (folder / "rate.txt").read_text() == "48000"
    played = np.load(folder / "played.npy")
    assert 0.0 < np.abs(played).max() <= 10.0 ** (START_DB / 20.0)
    assert played[0, 0] == 0.0
    assert shell.run("play", take.name, "--gain-db", "20").code == 0
    louder = np.load(folder / "played.npy")
    assert np.abs(played).max() < np.abs(louder).max() <= CEILING


def test_a_scene_is_played_without_writing_anything(shell, small, speaker):
    folder = speaker(RECORDER)
    before = {entry.name for entry in shell.folder.iterdir()}
    assert shell.run("play", small.name).code == 0
    assert np.load(folder / "played.npy").shape == (19200, 1)  # 0.4 s
    assert {entry.name for entry in shell.folder.iterdir()} == before


def test_a_scene_and_its_take_sound_alike(shell, small, take, speaker):
    folder = speaker(RECORDER)
    heard = []
    for what in (small.name, take.name):
        assert shell.run("play", what).code == 0
        heard.append(np.load(folder / "played.npy"))
    # The take is rounded to 24 bit at 20 Pa full scale and then made louder; the scene is not rounded.
    manifest = json.loads((take / f"{take.name}.json").read_text(encoding="utf-8"))
    step = 2.0**-23 * 10.0 ** ((START_DB - manifest["sound"]["levels"]["peak_dbfs"]) / 20.0)
    np.testing.assert_allclose(heard[0], heard[1], rtol=0, atol=2.0 * step)


def test_a_renamed_take_is_played(shell, take, speaker):
    folder = speaker(RECORDER)
    take.rename(shell.folder / "best one")
    assert shell.run("play", "best one").code == 0
    assert (folder / "played.npy").exists()


def test_what_cannot_be_played_is_refused(shell, take, speaker):
    speaker(RECORDER)
    sound = take / f"{take.name}.wav"
    for damage, said in (
        (lambda: sound.write_bytes(b"no sound at all"), "cannot be read"),
        (sound.unlink, "no WAV"),
        (lambda: shutil.rmtree(take), "no such take or scene"),
    ):
        damage()
        outcome = shell.run("play", take.name)
        assert outcome.code == 2
        assert said in outcome.err
        assert "Traceback" not in outcome.err
