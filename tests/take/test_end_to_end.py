"""From a scene file to a checked take, read back by other libraries than the ones that wrote it.

Sync is measured between the event table, the cues, the animation keys and the waveform, which is
correlated with one made again from the modal states of the run by another way than the renderer's.
"""

from __future__ import annotations

import csv
import json
import os
import subprocess
import sys
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest
import soundfile

from resonate.errors import ResonateError, TakeError
from resonate.modes.store import ModeStore
from resonate.scene.read import parse_scene
from resonate.take.check import check_take
from resonate.take.make import make_take, run_scene, transfers_of
from resonate.take.sync import onset_near, sync_by_correlation

SCENE = """
title = "Signal loft chime"
[take]
length = "1.5 s"
seed = 11
[picture]
rate = "{rate}"
start = "{start}"
handles = 6
[sound]
rate = "{sample_rate} Hz"
level = {{peak = "-6 dB"}}
format = "{format}"
[[body]]
name = "chime"
shape = "bar"
length = "300 mm"
width = "30 mm"
height = "8 mm"
material = "brass"
floating = true
modes = {{heard = "12 kHz", solved = "40 kHz"}}
[[body]]
name = "lid"
shape = "plate"
outline = {{rectangle = [0.2, 0.15]}}
thickness = "2 mm"
material = "brass"
place = [0, 0, 0.5]
floating = true
modes = {{heard = "6 kHz", solved = "20 kHz", most = 60}}
[[strike]]
body = "chime"
time = "0.2 s"
spot = {{fraction = [0.4]}}
striker = "steel ball"
speed = "0.5 m/s"
[[strike]]
body = "chime"
time = "0.61371 s"
spot = {{fraction = [0.1]}}
striker = "steel ball"
speed = "0.4 m/s"
[[strike]]
body = "lid"
time = "1.05 s"
spot = {{fraction = [0.3, 0.4]}}
striker = "steel ball"
speed = "0.3 m/s"
"""
COMBINATIONS = [
    ("24", 48000),
    ("24000/1001", 48000),
    ("25", 48000),
    ("30000/1001 drop", 48000),
    ("24000/1001", 44100),
    ("30000/1001 drop", 44100),
    ("24000/1001", 96000),
]


def text_of(rate="24000/1001", sample_rate=48000, sample_format="24-bit"):
    start = "00:59:59;12" if "drop" in rate else "01:00:00:00"
    return SCENE.format(rate=rate, start=start, sample_rate=sample_rate, format=sample_format)


@pytest.fixture(scope="module")
def store(tmp_path_factory):
    return ModeStore(tmp_path_factory.mktemp("modes"))


def table(take, ending):
    with (take / f"{take.name}{ending}").open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def remade(scene, store):
    """The sound at the first microphone from the states of the run, without the renderer.

    With z = q' - conj(lambda) q, so that q'' = Re[(1 + j a/wd) z']; the derivative is a difference here. Then
    p = sum Re[w q''], with the radiation model's weights w, at the times of emission.
    """
    ran = run_scene(scene, store=store)
    clock, mic = scene.clock, np.asarray(scene.mics[0].place_m)
    times = np.array([float(clock.sample_time(n)) for n in range(clock.sample_count)])
    out = np.zeros(len(times))
    centres = [track.pose(np.zeros(1))[0][0] for track in ran.record.bodies]
    distances = [float(np.linalg.norm(mic - centre)) for centre in centres]
    nearest = min(float(np.linalg.norm(np.asarray(m.place_m) - c)) for m in scene.mics for c in centres)
    for track, transfer, distance in zip(ran.record.bodies, transfers_of(scene, ran), distances, strict=True):
        # ISO 9613-1: the speed of sound at 20 degrees Celsius.
        emitted = times - (distance - nearest) / 343.2
        heard = track.modes.heard
        decay = track.modes.decay.total[:heard, None]
        damped = np.sqrt(track.modes.omega[:heard, None] ** 2 - decay**2)
        small = 1e-7
        rate = (track.modal(emitted + small)[:heard] - track.modal(emitted - small)[:heard]) / (2.0 * small)
        # A free body turns after it is struck: where the microphone stands is looked up every 2 ms.
        knots = np.arange(emitted[0], emitted[-1] + 4e-3, 2e-3)
        places, turns = track.pose(knots)
        weights = np.array(
            [
                transfer.weights(in_body(mic, place, turn, track), float(np.linalg.norm(mic - place)))[:heard]
                for place, turn in zip(places, turns, strict=True)
            ]
        )
        at = np.clip(((emitted - knots[0]) / 2e-3).astype(int), 0, len(knots) - 2)
        share = ((emitted - knots[at]) / 2e-3)[:, None]
        between = (1.0 - share) * weights[at] + share * weights[at + 1]
        out += np.real(np.sum(between.T * ((1.0 + 1j * decay / damped) * rate), axis=0))
    return out


def in_body(point_m, place_m, turn, track):
    from scipy.spatial.transform import Rotation

    return Rotation.from_quat(turn).inv().apply(point_m - place_m) + track.inertia.centre_m


@pytest.mark.parametrize(("rate", "sample_rate"), COMBINATIONS)
def test_everything_is_in_step_to_better_than_a_sample(tmp_path, store, rate, sample_rate):
    wavinfo = pytest.importorskip(
        "wavinfo", reason="wavinfo, the independent reader of cues, is not installed"
    )
    pygltflib = pytest.importorskip(
        "pygltflib", reason="pygltflib, the independent reader of glTF, is not installed"
    )
    scene = parse_scene(text_of(rate, sample_rate))
    take = make_take(scene, out=tmp_path, store=store)

    events = table(take, ".events.csv")
    begin = np.array([float(row["begin_s"]) for row in events])
    assert len(events) >= 3
    exact = Fraction(rate.removesuffix(" drop"))

    # First touch is when the scene says: the strike times, counted from frame 0.
    asked = np.array([0.2, 0.61371, 1.05]) + float(6 / exact)
    first = [begin[np.argmin(np.abs(begin - moment))] for moment in asked]
    np.testing.assert_allclose(first, asked, atol=0.5 / sample_rate)

    info = wavinfo.WavInfoReader(str(take / f"{take.name}.wav"))
    cues = np.array([cue.position for cue in info.cues.cues])
    # Half a sample by rounding to the grid.
    np.testing.assert_allclose(cues, begin * sample_rate, rtol=0, atol=0.5 + 1e-6)

    keys = gltf_keys(pygltflib, take)
    for moment in begin:
        # One step of single precision at that time.
        assert np.min(np.abs(keys - moment)) <= np.spacing(np.float32(moment))
    frames = np.array([float(k / exact) for k in range(scene.clock.frame_count)])
    assert all(np.float32(moment) in keys.astype(np.float32) for moment in frames)

    wave, _ = soundfile.read(take / f"{take.name}.wav", always_2d=True)
    late = sync_by_correlation(wave[:, 0], remade(scene, store), rate_hz=sample_rate, below_hz=10e3)
    print(f"{rate} {sample_rate}: wave {late:+.4f} samples late")
    # Far below the sample that is promised; what is left is the reference's aliasing during contacts.
    assert abs(late) < 0.01

    # From midnight to frame 0, in samples (SMPTE ST 12-1; EBU Tech 3285).
    start = 107892 - 18 if "drop" in rate else 3600 * round(exact)
    assert abs(info.bext.time_reference - (start - 6) / exact * sample_rate) <= Fraction(1, 2)


def gltf_keys(pygltflib, take):
    file = pygltflib.GLTF2().load(str(take / f"{take.name}.glb"))
    accessor = file.accessors[file.animations[0].samplers[0].input]
    view = file.bufferViews[accessor.bufferView]
    return np.frombuffer(file.binary_blob(), "<f4", accessor.count, view.byteOffset or 0).astype(np.float64)


@pytest.mark.parametrize("sample_format", ["16-bit", "24-bit", "float"])
def test_the_check_passes_and_so_does_a_second_run(tmp_path, store, sample_format):
    scene = parse_scene(text_of(sample_format=sample_format))
    take = make_take(scene, out=tmp_path, store=store)
    report = check_take(take, again=True, store=store)
    assert report.ok, "\n".join(map(str, report.findings))
    again = [finding for finding in report.findings if finding.name.startswith("sound at")]
    assert again
    for finding in again:
        assert abs(float(finding.measured.split()[0])) < 1e-3


def test_a_millisecond_is_found_by_the_second_run(tmp_path, store):
    take = make_take(parse_scene(text_of()), out=tmp_path, store=store)
    path = take / f"{take.name}.wav"
    samples, rate = soundfile.read(path)
    data = path.read_bytes()
    place = data.index(b"data" + (3 * len(samples)).to_bytes(4, "little")) + 8
    path.write_bytes(data[:place] + bytes(48 * 3) + data[place : -48 * 3])
    names = {finding.name for finding in check_take(take, again=True, store=store).findings if not finding.ok}
    assert any(name.startswith("sound at") for name in names)
    assert rate == 48000


def test_onsets_are_where_the_contacts_are(tmp_path, store):
    take = make_take(parse_scene(text_of()), out=tmp_path, store=store)
    wave, rate = soundfile.read(take / f"{take.name}.wav")
    late = json.loads((take / f"{take.name}.json").read_text(encoding="utf-8"))["sound"]["delay"]["late_s"]
    for row in table(take, ".events.csv")[:1]:
        expected = float(row["begin_s"]) + next(iter(late[row["body"]].values()))
        found = onset_near(wave, rate_hz=rate, expected_s=expected, reach_s=0.02)
        # A detector's accuracy, not the file's.
        assert found == pytest.approx(expected, abs=2e-3)


TAKE = """
import sys
from resonate.modes.store import ModeStore
from resonate.scene.read import parse_scene
from resonate.take.make import make_take
store = ModeStore(sys.argv[3]) if sys.argv[3] else None
make_take(parse_scene(open(sys.argv[1], encoding="utf-8").read()), out=sys.argv[2], store=store)
"""


def test_bytes_do_not_depend_on_process_threads_or_cache(tmp_path, store):
    scene_file = tmp_path / "chime.toml"
    scene_file.write_text(text_of(sample_format="16-bit"), encoding="utf-8")
    made = []
    for threads, cache in (("1", ""), ("2", ""), ("2", str(store.path))):
        out = tmp_path / f"{threads}{len(made)}"
        names = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "NUMBA_NUM_THREADS")
        environment = os.environ | dict.fromkeys(names, threads) | {"PYTHONPATH": os.pathsep.join(sys.path)}
        command = [sys.executable, "-c", TAKE, str(scene_file), str(out), cache]
        subprocess.run(command, env=environment, check=True, cwd=Path.cwd())
        (take,) = out.iterdir()
        made.append({file.name: file.read_bytes() for file in take.iterdir()})
    assert len(made[0]) == 5
    for other in made[1:]:
        assert other.keys() == made[0].keys()
        different = [name for name in other if other[name] != made[0][name]]
        assert different == []


def test_only_the_files_asked_for(tmp_path, store):
    text = text_of().replace("seed = 11", 'seed = 11\nfiles = ["events", "manifest"]')
    take = make_take(parse_scene(text), out=tmp_path, store=store)
    assert sorted(file.name for file in take.iterdir()) == [f"{take.name}.events.csv", f"{take.name}.json"]
    manifest = json.loads((take / f"{take.name}.json").read_text(encoding="utf-8"))
    assert manifest["sound"] is None
    assert manifest["bodies"][0]["shown"] is None
    assert check_take(take).ok


def test_bodies_that_are_alike_are_solved_once(tmp_path, monkeypatch):
    from resonate.modes import solve

    text = text_of()
    begin, end = text.index("[[body]]"), text.index('[[body]]\nname = "lid"')
    twin = (
        text[begin:end].replace('"chime"', '"chime twin"').replace("floating", "place = [0, 1, 0]\nfloating")
    )
    scene = parse_scene(text[:end] + twin + text[end:])
    solved = []
    real = solve.solve_modes
    monkeypatch.setattr(
        solve, "solve_modes", lambda body, **more: solved.append(body.name) or real(body, **more)
    )
    ran = run_scene(scene)
    assert solved == ["chime", "lid"]
    assert [modes.body for modes in ran.modes] == ["chime", "chime twin", "lid"]
    assert not any("'chime'" in note for note in ran.modes[1].warnings)


def test_a_refused_run_leaves_nothing(tmp_path, store):
    # Far too loud for full scale: found only once the sound is rendered.
    text = text_of().replace('level = {peak = "-6 dB"}', 'full_scale = "1e-6 Pa"')
    with pytest.raises(TakeError, match="full scale"):
        make_take(parse_scene(text), out=tmp_path / "takes", store=store)
    assert list(tmp_path.iterdir()) == []


def test_an_existing_take_is_found_before_anything_is_run(tmp_path, store):
    make_take(parse_scene(text_of()), out=tmp_path, store=store)
    said = []
    with pytest.raises(ResonateError, match="already"):
        make_take(parse_scene(text_of()), out=tmp_path, store=store, progress=said.append)
    assert said == []
    make_take(parse_scene(text_of()), out=tmp_path, store=store, replace=True, progress=said.append)
    assert said[:3] == ["modes of chime", "modes of lid", "running"]
    assert [entry.name for entry in tmp_path.iterdir()] == ["Signal loft chime"]


def test_a_store_that_cannot_be_written_changes_no_byte(tmp_path, store):
    blocked = tmp_path / "store"
    blocked.write_text("a file where the folder should be")
    scene = parse_scene(text_of())
    first = make_take(scene, out=tmp_path / "a", store=ModeStore(blocked))
    second = make_take(scene, out=tmp_path / "b", store=store)
    for file in first.iterdir():
        assert file.read_bytes() == (second / file.name).read_bytes(), file.name
    assert check_take(first).ok
