"""Strikes on solids do not depend on how fine the mesh is."""

from __future__ import annotations

import numpy as np

from resonate.body import solid_layout
from resonate.body.build import build_body
from resonate.modes.solve import solve_modes
from resonate.run.blow import _gives, _touched, make_blows
from resonate.scene.read import parse_scene

SCENE = """
[take]
length = "1 s"
[[body]]
name = "kentledge"
shape = "block"
size = ["120 mm", "40 mm", "80 mm"]
material = {density = 7850, young = 200e9, poisson = 0.3}
floating = true
modes = {heard = "10 kHz", solved = "30 kHz"}
[[strike]]
body = "kentledge"
time = "0.1 s"
spot = {fraction = [0.7, 0.4]}
striker = "steel ball"
speed = "1 m/s"
"""


def test_a_finer_mesh_makes_no_softer_spot(monkeypatch):
    scene = parse_scene(SCENE)
    gains, gives, spreads, left = [], [], [], []
    for nodes_per_wave in (4.4, 9.0):
        monkeypatch.setattr(solid_layout, "_NODES_PER_WAVE", nodes_per_wave)
        body = build_body(scene.bodies[0])
        modes = solve_modes(body)
        (blow,) = make_blows([(0, scene.strikes[0])], body, modes)
        spot = body.spot(scene.strikes[0].spot)
        gains.append(np.abs(blow.gains[1, : modes.count]))
        gives.append(blow.give_m_n[1, 1])
        spreads.append(spot.spread_m)
        left.append(_gives(body, modes, _touched(body, [spot], [spot.spread_m]), None)[0][1, 1])
    assert spreads[1] < 0.75 * spreads[0]
    np.testing.assert_allclose(gains[1], gains[0], atol=0.01 * gains[0].max())
    # What the mesh itself gives under the patch grows as that of a half-space pressed on a smaller one: by
    # 16 (1 - nu^2)/(3 pi^2 E) (1/a2 - 1/a1) (Timoshenko & Goodier, Theory of Elasticity, section 139). The contact
    # law holds that already, so that it is taken away.
    grown = 16.0 * 0.91 / (3.0 * np.pi**2 * 200e9) * (1.0 / spreads[1] - 1.0 / spreads[0])
    # Seven points stand for an even pressure on elements no larger than the patch.
    np.testing.assert_allclose(left[1] - left[0], grown, rtol=0.3)
    assert abs(gives[1] - gives[0]) < 0.1 * left[0]
