"""Supported bodies that something lets move: their picture turns and does not stretch."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.linalg import expm
from scipy.spatial.transform import Rotation

from resonate.body.build import build_body
from resonate.modes.solve import solve_modes
from resonate.motion.curves import curves
from resonate.run.engine import run
from resonate.run.flight import matrix
from resonate.run.twist import finite, twists_of
from resonate.scene.read import parse_scene

FLAP = """
title = "check"
[take]
length = "1 s"
[picture]
rate = 24
[[body]]
name = "hatch"
shape = "plate"
outline = {rectangle = [0.3, 0.2]}
thickness = 0.004
material = "brass"
place = [0.2, 1.0, -0.1]
turn = {axis = [0, 1, 0], angle = "30 deg"}
support = [{where = "x-", hold = "pinned"}]
modes = {most = 20}
show = {ring = "true"}
[[strike]]
time = "0.1 s"
spot = {point = [0.1, 0.002, 0.0]}
striker = "hammer"
speed = "0.8 m/s"
"""


def ran(text):
    scene = parse_scene(text)
    body = build_body(scene.bodies[0])
    modes = solve_modes(body)
    return scene, body, modes, run(scene, [body], [modes])


def test_exponential_of_a_twist_is_that_of_its_matrix():
    # Against the matrix exponential of the 4 x 4 screw (general library: scipy.linalg.expm).
    rng = np.random.default_rng(4)
    for size in (1e-9, 1e-4, 0.3, 2.0, 9.0):
        shift, angle = rng.normal(size=3), rng.normal(size=3)
        angle *= size / np.linalg.norm(angle)
        screw = np.zeros((4, 4))
        screw[:3, :3] = np.cross(np.eye(3), angle)
        screw[:3, 3] = shift
        place, turn = finite(np.concatenate((shift, angle))[None], turn=np.array([0, 0, 0, 1.0]), to_world=np.eye(3))

        np.testing.assert_allclose(place[0], expm(screw)[:3, 3], rtol=1e-9, atol=1e-12)
        np.testing.assert_allclose(matrix(turn[0]), expm(screw)[:3, :3], atol=1e-12)


def test_a_flap_turns_about_its_hinge():
    scene, body, modes, record = ran(FLAP)
    track = record.bodies[0]
    assert modes.rigid.shape[1] == 1
    twist = twists_of(body, modes)[:, 0]
    # The hinge lies along z at x = -0.15: all of the shift is turning about it.
    np.testing.assert_allclose(twist[:3], np.cross(twist[3:], [0.15, 0, 0]), atol=1e-9)
    np.testing.assert_allclose(twist[3:5] / twist[5], 0.0, atol=1e-9)

    times = np.linspace(0.0, 1.0, 41)
    place, turn = track.pose(times)
    hinge = np.array([[-0.15, 0, -0.1], [-0.15, 0, 0.1]]) - body.inertia.centre_m
    rest = np.array([0.2, 1.0, -0.1]) + (matrix(track.turn) @ np.array([[-0.15, 0, -0.1], [-0.15, 0, 0.1]]).T).T
    for now, spun in zip(place, turn, strict=True):
        ends = now + (matrix(spun) @ hinge.T).T
        np.testing.assert_allclose(ends, rest, atol=1e-9)
    # Impulse J at arm r about the hinge: I w = J r (Goldsmith, Impact, 1960, ch. 2), and it turns on at that rate.
    (event,) = record.events
    inertia = body.inertia.mass_kg * (0.3**2 + 0.004**2) / 3.0
    rate = event.impulse_ns * 0.25 / inertia
    angle = Rotation.from_quat(turn[-1]) * Rotation.from_quat(track.turn).inv()
    turned = rate * (1.0 - 0.5 * (event.begin_s + event.end_s))
    assert turned > 0.5
    assert angle.magnitude() == pytest.approx(abs((turned + np.pi) % (2 * np.pi) - np.pi), abs=0.02)
    assert any("its supports let it turn by" in note for note in record.warnings)

    # No shape carries it: vertices stay by the plate however far it turns.
    made = curves(record, [body], scene).bodies[0]
    assert all(label.startswith("mode_") for label in made.labels)
    reach = np.einsum("tk,knx->tnx", np.abs(made.weights), np.abs(made.targets)).max() if len(made.labels) else 0.0
    assert reach < 0.02


def test_a_body_whose_supports_hold_it_stays():
    _, body, modes, record = ran(FLAP.replace('"pinned"', '"clamped"'))

    assert twists_of(body, modes).shape == (6, 0)
    place, turn = record.bodies[0].pose(np.array([0.0, 0.9]))
    np.testing.assert_array_equal(place[0], place[1])
    np.testing.assert_array_equal(turn[0], turn[1])
    assert not any("its supports let it" in note for note in record.warnings)
