"""Whole scenes: bodies from the mesh to the record."""

from __future__ import annotations

import hashlib
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from resonate.body.build import build_body
from resonate.errors import RunError
from resonate.modes.solve import solve_modes
from resonate.run.blow import make_blows
from resonate.run.engine import run
from resonate.scene.read import parse_scene

SCENE = """
title = "Quillhaven signal loft"
[take]
length = "{length}"
[sound]
rate = "{rate} Hz"
[[body]]
name = "call bar"
shape = "bar"
length = "300 mm"
width = "30 mm"
height = "8 mm"
material = "brass"
{bar}
modes = {{heard = "12 kHz", solved = "{solved}"}}
[[body]]
name = "lid"
shape = "plate"
outline = {{rectangle = [0.2, 0.15]}}
thickness = "3 mm"
material = "brass"
place = [0, 0, 0.5]
{lid}
modes = {{heard = "6 kHz", solved = "15 kHz", most = 60}}
{strikes}
"""
BAR_STRIKE = """
[[strike]]
body = "call bar"
time = "0.2 s"
spot = {fraction = [0.4]}
striker = "steel ball"
speed = "0.5 m/s"
"""
LID_STRIKE = """
[[strike]]
body = "lid"
time = "0.1 s"
spot = {fraction = [0.3, 0.4]}
striker = "steel ball"
speed = "0.3 m/s"
"""


def scene_of(*strikes, length="1 s", rate=48000, bar="floating = true", lid="floating = true", solved="40 kHz"):
    return parse_scene(
        SCENE.format(length=length, rate=rate, bar=bar, lid=lid, solved=solved, strikes="".join(strikes))
    )


def solved_of(scene):
    bodies = [
        build_body(spec, temperature_k=scene.world.temperature_k, gravity_m_s2=scene.world.gravity_m_s2)
        for spec in scene.bodies
    ]
    return bodies, [solve_modes(body) for body in bodies]


def run_of(scene):
    return run(scene, *solved_of(scene))


def fingerprint(record):
    """Hash of every number of a record."""
    found = hashlib.sha256()
    for track in record.bodies:
        for part in track.segments:
            for value in (part.begin_s, part.z, part.step_s, part.force_n, part.rows):
                found.update(b"-" if value is None else np.ascontiguousarray(value).tobytes())
            if part.rigid is not None:
                for name in ("place_m", "turn", "speed_m_s", "spin_rad_s"):
                    found.update(np.ascontiguousarray(getattr(part.rigid, name)).tobytes())
    found.update(repr((record.events, record.ledger, record.warnings)).encode())
    return found.hexdigest()


@pytest.fixture(scope="module")
def struck():
    scene = scene_of(BAR_STRIKE, LID_STRIKE)
    return scene, *solved_of(scene)


def test_record_of_a_scene(struck):
    scene, bodies, modes = struck
    record = run(scene, bodies, modes)
    assert [track.name for track in record.bodies] == ["call bar", "lid"]
    # In order of time, numbered as in the scene.
    assert [(event.body, event.strike) for event in record.events] == [("lid", 1), ("call bar", 0)]
    assert [event.begin_s for event in record.events] == [0.1, 0.2]
    assert record.events[1].closing_speed_m_s == pytest.approx(0.5)
    assert record.events[1].other == "steel ball"
    ledger = record.ledger
    assert ledger.given == pytest.approx(0.5 * 0.0139 * (0.5**2 + 0.3**2))
    assert ledger.closes(1e-6)
    # What is measured; the promise is 1e-6.
    assert abs(ledger.residual) < 1e-12 * ledger.scale
    # Bars and lids of brass in the air: the hit is felt 0.12 m along, 4 mm up, on the upper face.
    np.testing.assert_allclose(record.events[1].place_m, [0.12, 0.004, 0.0], atol=1e-12)
    assert all(track.segments[0].begin_s == scene.clock.run_begin_s for track in record.bodies)


def test_motion_as_a_whole_is_the_mesh_s_own(struck):
    # Mass, centre and inertia move a free body; the modes' rigid motions say the same at every spot.
    scene, bodies, modes = struck
    for index, (body, found) in enumerate(zip(bodies, modes, strict=True)):
        asked = [(n, strike) for n, strike in enumerate(scene.strikes) if strike.body_index == index]
        blow = make_blows(asked, body, found)[0]
        axis, arm = blow.inward, blow.point_m - body.inertia.centre_m
        turn = np.cross(arm, axis)
        give = 1.0 / body.inertia.mass_kg + turn @ np.linalg.solve(body.inertia.tensor, turn)
        assert np.sum((axis @ blow.gains[:, found.count :]) ** 2) == pytest.approx(give, rel=1e-6)


def test_delivery_rate_and_length_do_not_change_the_run(struck):
    _, bodies, modes = struck
    first = run(scene_of(BAR_STRIKE, LID_STRIKE), bodies, modes)
    other = run(scene_of(BAR_STRIKE, LID_STRIKE, rate=96000, length="40 s"), bodies, modes)
    for a, b in zip(first.bodies, other.bodies, strict=True):
        # Memory follows contact time, not the length of the take.
        assert len(a.segments) == len(b.segments)
        for one, two in zip(a.segments, b.segments, strict=True):
            np.testing.assert_array_equal(one.z, two.z)
            if one.is_contact:
                np.testing.assert_array_equal(one.force_n, two.force_n)


SCRIPT = """
import importlib.util, sys
spec = importlib.util.spec_from_file_location("scenes", sys.argv[1])
scenes = importlib.util.module_from_spec(spec)
spec.loader.exec_module(scenes)
fall = 'spin = [3, 1, 20]\\nspeed = [0.1, 4, 0]'
print(scenes.fingerprint(scenes.run_of(scenes.scene_of(scenes.BAR_STRIKE, scenes.LID_STRIKE, bar=fall))))
"""


def test_two_processes_and_two_threads_give_the_same_bits():
    found = set()
    for threads in ("1", "2"):
        done = subprocess.run(
            [sys.executable, "-c", SCRIPT, str(Path(__file__))],
            env=os.environ
            | dict.fromkeys(("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "NUMBA_NUM_THREADS"), threads)
            | {"PYTHONPATH": str(Path(__file__).parents[2])},
            capture_output=True,
            text=True,
            check=True,
        )
        found.add(done.stdout.strip())
    assert len(found) == 1
    assert len(found.pop()) == 64


def test_band_of_the_contact_hardly_matters_with_the_compliance_of_what_is_missing():
    peaks = []
    for solved in ("15 kHz", "30 kHz", "80 kHz"):
        record = run_of(scene_of(BAR_STRIKE, solved=solved))
        peaks.append(record.events[0].peak_n)
    print(f"peak force with modes to 15, 30, 80 kHz: {np.round(peaks, 2)} N")
    np.testing.assert_allclose(peaks[:2], peaks[2], rtol=0.02)


def test_spot_of_a_plate_is_averaged_over_the_patch(struck):
    scene, bodies, modes = struck
    blow = make_blows([(1, scene.strikes[1])], bodies[1], modes[1])[0]
    point = np.asarray(bodies[1].probe(blow.point_m[None]).todense()) @ modes[1].shape
    # The ball presses a disc of 0.1 mm: nearly, but not exactly, the motion of the point.
    assert 0.0 < np.max(np.abs(blow.gains[:, : modes[1].count] - point)) < 1e-3 * np.max(np.abs(point))


def test_supported_and_held_bodies():
    clamped = 'support = [{where = "left", hold = "clamped"}]'
    record = run_of(scene_of(BAR_STRIKE, LID_STRIKE, bar=clamped, lid="held = true"))
    assert record.ledger.closes(1e-9)
    for track in record.bodies:
        assert not track.free
        assert track.segments[0].rigid is None
        place, turn = track.pose(np.array([0.0, 0.5]))
        np.testing.assert_array_equal(turn, [[0.0, 0.0, 0.0, 1.0]] * 2)
        # The mass centre, in the world, for supported bodies too.
        np.testing.assert_allclose(
            place, np.tile([0.15, 0.0, 0.0] if track.name == "call bar" else [0.0, 0.0, 0.5], (2, 1)), atol=1e-12
        )
        assert track.modes.rigid.shape[1] == 0


def test_sliding_body_moves_along_what_is_free():
    guided = 'support = [{where = "left", hold = {fix = ["x", "z", "rx", "ry", "rz"]}}]'
    record = run_of(scene_of(BAR_STRIKE, bar=guided))
    track = record.bodies[0]
    assert track.modes.rigid.shape[1] == 1
    assert record.ledger.closes(1e-9)
    assert record.ledger.rigid_left > 0.0
    moved = track.linear(np.array([0.0, 0.3, 0.4, 0.5]))[0]
    assert moved[0] == 0.0
    # Uniform motion after the hit.
    assert moved[3] - moved[2] == pytest.approx(moved[2] - moved[1], rel=1e-9)
    event = record.events[0]
    speed = np.sqrt(2.0 * record.ledger.rigid_left) / np.sqrt(track.inertia.mass_kg)
    assert speed == pytest.approx(event.impulse_ns / track.inertia.mass_kg, rel=1e-6)


def test_falling_spinning_body_struck_twice():
    bar = "speed = [0, 1, 0]\nspin = [0.5, 2, 1]\nplace = [0, 3, 0]"
    again = BAR_STRIKE.replace("0.2 s", "0.4 s").replace("[0.4]", "[0.9]").replace('"0.5 m/s"', '"6 m/s"')
    first = BAR_STRIKE.replace('"0.5 m/s"', '"4 m/s"')
    record = run_of(scene_of(first, again, bar=bar))
    ledger = record.ledger
    print(f"residual {ledger.residual / ledger.scale:.1e}")
    assert abs(ledger.residual) < 1e-9 * ledger.scale
    assert len(record.events) == 2
    # At time 0 it is where the scene puts it.
    place, turn = record.bodies[0].pose(np.zeros(1))
    np.testing.assert_allclose(place[0], [0.15, 3.0, 0.0], atol=1e-9)
    np.testing.assert_allclose(np.abs(turn[0]), [0.0, 0.0, 0.0, 1.0], atol=1e-9)
    # Before the first hit its centre is on its parabola.
    place = record.bodies[0].pose(np.array([0.1]))[0][0]
    np.testing.assert_allclose(place, [0.15, 3.0 + 0.1 - 0.5 * 9.80665 * 0.01, 0.0], atol=1e-9)


def test_beyond_what_is_linear_is_said_with_numbers():
    hard = LID_STRIKE.replace('"0.3 m/s"', '"120 m/s"')
    record = run_of(scene_of(hard, bar="spin = [0, 0, 400]\nfloating = true"))
    assert any("call bar" in note and "turns at 400 rad/s" in note for note in record.warnings)
    assert any("lid" in note and "strike[0] deflects it by" in note and "mm" in note for note in record.warnings)
    soft = LID_STRIKE.replace("steel ball", "felt medium")
    assert run_of(scene_of(BAR_STRIKE, soft)).warnings == ()


def test_what_truncation_takes_is_said():
    record = run_of(scene_of(LID_STRIKE))

    share = record.ledger.lost_truncation / record.ledger.scale
    assert any(f"body 'lid': {100 * share:.0f} % of the energy" in note for note in record.warnings)


def test_a_strike_on_a_held_place_is_said():
    held = 'support = [{where = "left", hold = "clamped"}]'
    on_it = BAR_STRIKE.replace("spot = {fraction = [0.4]}", "spot = {point = [0, 0.005, 0]}")
    assert on_it != BAR_STRIKE
    assert any("meets a place that is held" in note for note in run_of(scene_of(on_it, bar=held)).warnings)
    assert not any("place that is held" in note for note in run_of(scene_of(BAR_STRIKE, bar=held)).warnings)


def test_refused_strikes_say_which_and_how_to_fix(struck):
    _, bodies, modes = struck
    wrong = BAR_STRIKE + "direction = [0, 1, 0]\n"
    with pytest.raises(RunError, match="points away") as caught:
        run(scene_of(LID_STRIKE, wrong), bodies, modes)
    assert "strike[1] on body 'call bar'" in str(caught.value)
    assert "fix:" in str(caught.value)


def test_overdamped_body_is_refused(struck):
    scene, bodies, modes = struck
    from dataclasses import replace

    from resonate.modes.modeset import Decay

    total = modes[0].omega * 1.5
    none = np.zeros_like(total)
    heavy = replace(modes[0], decay=Decay(material=total, thermoelastic=none, support=none, radiation=none))
    with pytest.raises(RunError, match="does not swing"):
        run(scene, bodies, [heavy, modes[1]])
