"""How a vessel is written, and what is refused about it."""

from __future__ import annotations

import pytest

from resonate.errors import SceneError
from resonate.scene.model import NamedPlace, VesselShape
from resonate.scene.read import parse_scene
from resonate.scene.resolve import FRONT

SOUND = """\
title = "Galley mug"
[take]
length = "1 s"
[[body]]
name = "mug"
shape = "vessel"
profile = [[0, "2 mm"], ["40 mm", "2 mm"], ["40 mm", "90 mm"]]
wall = "3 mm"
material = "porcelain"
support = [{where = "base", hold = "clamped"}]
[[strike]]
time = 0
striker = "spoon"
speed = 1
"""


def test_a_vessel_in_units():
    scene = parse_scene(SOUND)
    shape = scene.bodies[0].shape
    assert isinstance(shape, VesselShape)
    assert shape.profile_m == ((0.0, 0.002), (0.04, 0.002), (0.04, 0.09))
    assert shape.walls_m == (0.003, 0.003, 0.003)
    assert not shape.smooth
    assert scene.bodies[0].support[0].where == NamedPlace(names=("base",))
    assert scene.strikes[0].spot.name == "rim"
    # Heard from 1 m off the middle of its height.
    assert scene.mics[0].place_m[1] == pytest.approx(0.046 + FRONT[1])


def test_walls_and_lugs():
    text = SOUND.replace('"3 mm"', '["3 mm", "4 mm", 0.002]\nsmooth = true\nlugs = [{mass = "8 g", at = [0.9, "25 %"]}]')
    shape = parse_scene(text).bodies[0].shape
    assert shape.wall_m == (0.003, 0.004, 0.002)
    assert shape.lugs[0].mass_kg == pytest.approx(0.008)
    assert shape.lugs[0].at == (0.9, 0.25)


PROFILE = 'profile = [[0, "2 mm"], ["40 mm", "2 mm"], ["40 mm", "90 mm"]]'


@pytest.mark.parametrize(
    ("old", "new", "where", "what", "fix"),
    [
        (PROFILE, "profile = [[0, 0]]", "body[0].profile", "is not a profile", "two points"),
        (PROFILE, "profile = [[0, 0], [0.04]]", "body[0].profile[1]", "is not a point", "[radius, height]"),
        (PROFILE, "profile = [[0, 0], [-0.04, 0.1]]", "body[0].profile[1][0]", "-0.04 is out of range", "at least 0"),
        (PROFILE, "profile = [[0.1, 0], [0, 0.1], [0.1, 0.2]]", "body[0].profile[1][0]", "meets the axis", "first or the last"),
        (PROFILE, "profile = [[0, 0], [0.1, 0.1], [0.1, 0], [0.02, 0.08]]", "body[0].profile[2]", "crosses itself", "in order"),
        (PROFILE, "profile = [[0.1, 0], [0.1, 0.1], [0.2, 0.1], [0.1, 0]]", "body[0].profile[3]", "ends where it begins", "open"),
        (PROFILE, "profile = [[0.1, 0], [0.1, 0], [0.1, 0.1]]", "body[0].profile[0]", "at the very end", "once"),
        (PROFILE, "", "body[0].profile", "profile is missing", "[[0, 0]"),
        ('wall = "3 mm"', 'wall = ["3 mm", "2 mm"]', "body[0].wall", "2 walls for 3 points", "one for each"),
        ('wall = "3 mm"', 'wall = "60 mm"', "body[0].wall", "for a vessel of", "thinner"),
        ('wall = "3 mm"', "wall = 0", "body[0].wall", "out of range", "above 0"),
        ('wall = "3 mm"', 'wall = ["3 mm", "x", "3 mm"]', "body[0].wall[1]", "x", "length"),
        ('wall = "3 mm"', 'wall = "3 mm"\nsmooth = 1', "body[0].smooth", "neither true nor false", "quotes"),
        ('wall = "3 mm"', 'wall = "3 mm"\nlugs = [{mass = 0.1}]', "body[0].lugs[0].at", "at is missing", "add at"),
        ('wall = "3 mm"', 'wall = "3 mm"\nlugs = [{mass = 0.1, at = [2, 0]}]', "body[0].lugs[0].at[0]", "out of range", "at most 1"),
        ('wall = "3 mm"', 'wall = "3 mm"\nlugs = 3', "body[0].lugs", "3", "list"),
        ('"base"', '"left"', "body[0].support[0].where", "not a place", "rim"),
        ("speed = 1", 'speed = 1\nspot = "centre"', "strike[0].spot", "not a spot of this vessel", "rim"),
        ("speed = 1", "speed = 1\nspot = {fraction = [0.5]}", "strike[0].spot.fraction", "1 fraction", "[u, v]"),
    ],
)
def test_what_is_refused(old, new, where, what, fix):
    assert old in SOUND
    with pytest.raises(SceneError) as caught:
        parse_scene(SOUND.replace(old, new))
    text = str(caught.value)
    assert where in text
    assert what in text
    assert fix in text
