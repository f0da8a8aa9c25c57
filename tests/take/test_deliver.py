"""From a record made by hand to the wave file: time, level, dither, header."""

from __future__ import annotations

from fractions import Fraction
from types import SimpleNamespace

import numpy as np
import pytest
import soundfile

from resonate.errors import TakeError
from resonate.modes.modeset import Decay, ModeSet
from resonate.run.record import Segment
from resonate.take.deliver import dither_source, write_sound
from resonate.take.sync import sync_by_correlation

HERTZ = np.array([700.0, 1890.0, 3500.0, 9100.0])
STEP_S, STEPS = 1.0 / 192000, 40


def body(begin_s):
    """A body at rest, hit once by a half sine."""
    omega, rate = 2.0 * np.pi * HERTZ, np.array([20.0, 30.0, 40.0, 60.0])
    none = np.zeros(len(omega))
    modes = ModeSet(
        body="mug",
        key="0",
        omega=omega,
        shape=np.ones((1, len(omega))),
        rigid=np.zeros((1, 0)),
        decay=Decay(material=rate, thermoelastic=none, support=none, radiation=none),
        residual=none,
        heard=len(omega),
        heard_hz=20e3,
        solved_hz=80e3,
    )
    lam = -rate + 1j * np.sqrt(omega**2 - rate**2)
    force = 50.0 * np.sin(np.pi * (np.arange(STEPS) + 0.5) / STEPS)
    z = np.zeros(len(omega), complex)
    hit = Segment(
        begin_s, z, None, step_s=STEP_S, force_n=force[None], rows=np.ones((1, len(z))), contacts=(0,)
    )
    for value in force:
        z = np.exp(lam * STEP_S) * z + np.expm1(lam * STEP_S) / lam * value
    segments = (Segment(-1.0, np.zeros_like(z), None), hit, Segment(hit.end_s, z, None))

    def pose(times_s):
        count = len(times_s)
        return np.zeros((count, 3)), np.tile([0.0, 0.0, 0.0, 1.0], (count, 1))

    inertia = SimpleNamespace(centre_m=np.zeros(3))
    return SimpleNamespace(name="mug", modes=modes, segments=segments, pose=pose, free=False, moves=False, inertia=inertia)


def acceleration(track, times_s):
    """Summed modal acceleration after the hit, from displacements by central differences."""
    last = track.segments[-1]
    decay = track.modes.decay.total
    lam = -decay + 1j * np.sqrt(track.modes.omega**2 - decay**2)

    def displacement(times):
        return np.sum((last.z * np.exp(np.outer(times - last.begin_s, lam))).imag / lam.imag, axis=1)

    small = 1e-6
    second = displacement(times_s + small) - 2.0 * displacement(times_s) + displacement(times_s - small)
    return np.where(times_s > last.begin_s, second / small**2, 0.0)


FLAT = SimpleNamespace(
    radius_m=0.1, doubts=(), weights=lambda place_m, reference_m: np.ones(len(HERTZ), complex) / reference_m
)


def record_of(begin_s):
    track = body(begin_s)
    end_s = begin_s + STEPS * STEP_S
    event = SimpleNamespace(kind="strike", body="mug", other="steel ball", begin_s=begin_s, end_s=end_s)
    return SimpleNamespace(bodies=(track,), events=(event,), warnings=())


def with_sound(scene, **changes):
    return scene.model_copy(update={"sound": scene.sound.model_copy(update=changes)})


def peak_level(scene, db):
    return with_sound(scene, level=scene.sound.level.model_copy(update={"kind": "peak", "db": db}))


@pytest.mark.parametrize("rate", ["24", "24000/1001", "25", "30000/1001 drop"])
@pytest.mark.parametrize("sample_rate", [44100, 48000, 96000])
def test_sound_stands_where_the_record_has_it(kit, tmp_path, rate, sample_rate):
    start = "01:00:00;00" if "drop" in rate else "01:00:00:00"
    scene = peak_level(kit.scene(rate=rate, start=start, sample_rate=sample_rate, length="1 s"), -6.0)
    record = record_of(0.3111)
    heard = write_sound(tmp_path / "mug.wav", scene, record, [FLAT])

    wave, _ = soundfile.read(tmp_path / "mug.wav")
    begin = -8 / Fraction(rate.removesuffix(" drop"))
    times = np.array([float(begin + Fraction(n, sample_rate)) for n in range(len(wave))])
    late = sync_by_correlation(
        wave, acceleration(record.bodies[0], times), rate_hz=sample_rate, below_hz=15e3
    )
    # The reference leaves out the 0.2 ms of contact, which is why it is not closer to nought.
    assert abs(late) < 0.05
    assert np.max(np.abs(wave)) == pytest.approx(10.0 ** (-6.0 / 20.0), abs=2.0**-22)
    assert heard.levels.peak_dbfs == pytest.approx(-6.0)


@pytest.mark.parametrize("sample_format", ["16-bit", "24-bit"])
def test_a_peak_of_full_scale_does_not_clip(kit, tmp_path, sample_format):
    scene = peak_level(kit.scene(format=sample_format), 0.0)
    write_sound(tmp_path / "mug.wav", scene, record_of(0.3111), [FLAT])
    wave, _ = soundfile.read(tmp_path / "mug.wav")
    # Within the dither's step and the missing positive full scale.
    steps = (1.0 - np.max(np.abs(wave))) * 2.0 ** (int(sample_format[:2]) - 1)
    assert 0.0 <= steps <= 4.0


def test_too_loud_for_full_scale_is_refused(kit, tmp_path):
    scene = with_sound(kit.scene(), full_scale_pa=1e-3)
    with pytest.raises(TakeError, match=r"a gain of -\d+\.\d+ dB is needed"):
        write_sound(tmp_path / "mug.wav", scene, record_of(0.3111), [FLAT])
    assert not (tmp_path / "mug.wav").exists()


def test_dither_follows_the_seed_and_only_the_seed(kit, tmp_path):
    def data(seed, name):
        scene = peak_level(kit.scene(format="16-bit"), -6.0)
        scene = scene.model_copy(update={"take": scene.take.model_copy(update={"seed": seed})})
        write_sound(tmp_path / name, scene, record_of(0.3111), [FLAT])
        return (tmp_path / name).read_bytes()

    assert data(3, "a.wav") == data(3, "b.wav")
    assert data(3, "a.wav") != data(4, "c.wav")
    scene = kit.scene()
    np.testing.assert_array_equal(dither_source(scene).random(4), dither_source(scene).random(4))


def test_the_header_tells_what_the_scene_says(kit, tmp_path):
    wavinfo = pytest.importorskip(
        "wavinfo", reason="wavinfo, the independent reader of bext, is not installed"
    )
    scene = peak_level(kit.scene(rate="30000/1001 drop", start="01:00:00;00"), -6.0)
    heard = write_sound(tmp_path / "mug.wav", scene, record_of(0.3111), [FLAT])

    info = wavinfo.WavInfoReader(str(tmp_path / "mug.wav"))
    # 107892 - 8 frames of 8008/5 samples from midnight, to the nearest sample (SMPTE ST 12-1).
    assert info.bext.time_reference == round(Fraction(107884 * 8008, 5))
    pressure = f"{heard.levels.full_scale_pa:.6g} Pa"
    assert info.bext.description == (
        f"Galley mug | full scale {pressure} | frame 0 at 00:59:59;22, 30000/1001 drop frames a second"
    )
    assert info.bext.originator_ref == scene.digest[:32]
    (cue,) = info.cues.cues
    assert info.cues.label_and_note(cue.name)[0] == "1 strike mug by steel ball"
    assert abs(cue.position - (0.3111 + 8 * 1001 / 30000) * 48000) <= 0.5
    assert info.bext.max_momentary_loudness == pytest.approx(heard.levels.momentary_lufs, abs=0.005)


def test_the_distance_taken_out_is_stated(kit, tmp_path):
    scene = peak_level(kit.scene(), -6.0)
    heard = write_sound(tmp_path / "mug.wav", scene, record_of(0.3111), [FLAT])
    # ISO 9613-1: 343.2 m/s at 20 degrees Celsius; the one microphone is where the scene puts it.
    distance = np.linalg.norm(scene.mics[0].place_m)
    assert heard.arrivals.removed_s == pytest.approx(distance / 343.2)
    assert heard.arrivals.late_s == {"mug": {scene.mics[0].name: 0.0}}
    kept = write_sound(tmp_path / "kept.wav", with_sound(scene, delay=True), record_of(0.3111), [FLAT])
    assert kept.arrivals.removed_s == 0.0
    assert kept.arrivals.late_s["mug"][scene.mics[0].name] == pytest.approx(distance / 343.2)
