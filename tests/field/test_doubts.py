"""Where the two radiation models are left: who is warned about, and in how many lines."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from resonate.body.build import build_body
from resonate.field.air import Air
from resonate.field.doubts import Doubt, told
from resonate.field.transfer import transfer_for
from resonate.modes.solve import solve_modes
from resonate.scene.read import parse_scene

AIR = Air(speed_m_s=343.2, density_kg_m3=1.204)
FLAT = """
[take]
length = 1
[[body]]
name = "hatch"
shape = "{shape}"
outline = {{ {outline} }}
thickness = "2 mm"
material = "steel"
modes = {{ heard = "1500 Hz", most = 12 }}
{more}
"""
PLATE = {"shape": "plate", "outline": "rectangle = [0.3, 0.2]"}
SKIN = {"shape": "membrane", "outline": "circle = 0.3"}


def doubts_of(shape, outline, more):
    scene = parse_scene(FLAT.format(shape=shape, outline=outline, more=more))
    body = build_body(scene.bodies[0])
    return transfer_for(body, solve_modes(body), AIR).doubts


ALL_ROUND = 'support = [{{where = "edge", hold = {hold}}}]'


@pytest.mark.parametrize(
    "more",
    [
        'support = "free"',
        "held = true",
        'support = [{where = "x-", hold = "clamped"}]',
        'support = [{where = ["x-", "x+", "z-"], hold = "pinned"}]',
        ALL_ROUND.format(hold='"guided"'),
        ALL_ROUND.format(hold='{fix = ["x", "z"]}'),
        ALL_ROUND.format(hold='{spring = "1 kN/m"}'),
        'support = [{where = {point = [0.1, 0, 0.05]}, hold = {cord = "0.2 m"}}]',
    ],
)
def test_any_flat_body_whose_edge_moves_is_warned_about(more):
    (doubt,) = doubts_of(**PLATE, more=more)
    assert doubt.kind == "free edge"
    # k a = 1 for half the diagonal, 0.18 m, at 343.2 m/s (the samples end a little inside the edge).
    assert doubt.limit_hz == pytest.approx(343.2 / (2.0 * np.pi * 0.18), rel=0.03)
    (line,) = told([doubt])
    # Both limits, and shortly.
    assert f"below {doubt.limit_hz:.0f} Hz" in line
    assert "edge-on and on the axis" in line
    assert len(line) < 160


@pytest.mark.parametrize("hold", ['"clamped"', '"pinned"', '"sliding"', '{fix = ["y"]}'])
def test_a_flat_body_whose_edge_is_held_is_not(hold):
    assert doubts_of(**PLATE, more=ALL_ROUND.format(hold=hold)) == ()


def test_a_skin_is_held_all_round_unless_it_is_not():
    tension = 'tension = "2 kN/m"'
    assert doubts_of(**SKIN, more=tension) == ()
    ring = {"shape": "membrane", "outline": "ring = [0.3, 0.1]"}
    (doubt,) = doubts_of(**ring, more=f'{tension}\nsupport = [{{where = "outer", hold = "pinned"}}]')
    assert doubt.kind == "free edge"


def test_a_thick_line_is_warned_about(air_model):
    points = np.array([[0.0, 0.0, 0.0], [0.1, 0.0, 0.0]])
    skin = points + np.array([0.0, 0.02, 0.0])
    volumes = np.full((2, 3), 1e-5)
    (thick,) = air_model.line(points, volumes, np.ones((2, 3)), 100.0, surface=skin).doubts
    # k a = 1 at a = 20 mm.
    assert thick == Doubt("thick line", "hatch", 1, 1, pytest.approx(343.2 / (2.0 * np.pi * 0.02)))
    assert air_model.line(points, volumes, np.ones((2, 3)), 10.0, surface=skin).doubts == ()


def test_a_take_is_told_once_however_many_bodies():
    one = Doubt("thick line", "spar", 3, 40, 4966.0)
    other = Doubt("free edge", "lid", 2, 90, 370.0)
    assert told([]) == ()
    lines = told([one, other, *(replace(one, body=f"spar {k}") for k in range(9))])
    assert len(lines) == 2
    assert "'spar' above 4966 Hz (3 of 40 modes)" in lines[1]
    assert lines[1].endswith("and 6 more")


def test_the_default_microphone_hears_a_free_plate(tmp_path):
    # On the axis the modes that a corner excites cancel out; off it they are heard. Both in the one model there is.
    scene = parse_scene(FLAT.format(**PLATE, more="held = true"))
    body = build_body(scene.bodies[0])
    modes = solve_modes(body)
    transfer = transfer_for(body, modes, AIR)
    default = np.abs(transfer.weights(np.array(scene.mics[0].place_m), 1.0))
    axis = np.abs(transfer.weights(np.array([0.0, 1.0, 0.0]), 1.0))
    assert np.min(default / np.max(default)) > 1e-2
    assert np.min(axis / np.max(default)) < 1e-6
