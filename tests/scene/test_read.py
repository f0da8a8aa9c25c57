"""Sound scenes: spellings, defaults, times, the digest."""

from __future__ import annotations

import json
import math
import pickle
from fractions import Fraction

import pytest
from pydantic import ValidationError

from resonate.scene.model import (
    BarShape,
    BodySpec,
    BoxPlace,
    CircleOutline,
    CordHold,
    FixHold,
    NamedHold,
    NamedPlace,
    PlateShape,
    PointPlace,
    PolygonOutline,
    RectangleOutline,
    RingOutline,
    SpringHold,
    TubeShape,
)
from resonate.scene.presets import material
from resonate.scene.read import parse_scene, read_scene

HEAD = "[take]\nlength = 2\n[[body]]\nname = 'pan'\nmaterial = 'brass'\n"


def body(text):
    return parse_scene(HEAD + text).bodies[0]


@pytest.mark.parametrize(
    "text",
    [
        'shape = "bar"\nlength = "0.3 m"\nwidth = "20 mm"\nheight = "5 mm"',
        'shape = {bar = {length = "0.3 m", width = "20 mm", height = "5 mm"}}',
        'shape = {kind = "bar", length = 0.3, width = 0.02, height = 0.005}',
        '[body.shape]\nkind = "bar"\nlength = "30 cm"\nwidth = "2 cm"\nheight = "0.5 cm"',
    ],
)
def test_a_shape_has_three_spellings(text):
    assert body(text).shape == BarShape(length_m=0.3, width_m=0.02, height_m=0.005)


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("{rectangle = [0.4, '30 cm']}", RectangleOutline(a_m=0.4, b_m=0.3)),
        ("{kind = 'rectangle', a = 0.4, b = 0.3}", RectangleOutline(a_m=0.4, b_m=0.3)),
        ("{rectangle = {a = 0.4, b = 0.3}}", RectangleOutline(a_m=0.4, b_m=0.3)),
        ("{circle = '0.2 m'}", CircleOutline(diameter_m=0.2)),
        ("{circle = {diameter = 0.2}}", CircleOutline(diameter_m=0.2)),
        ("{ring = [0.3, 0.1]}", RingOutline(outer_m=0.3, inner_m=0.1)),
        ("{polygon = [[0, 0], [1, 0], [0, 1]]}", PolygonOutline(corners_m=((0, 0), (1, 0), (0, 1)))),
        ("{polygon = [[0,0], [2,0], [2,1], [1,1], [1,2], [0,2]]}", None),  # a corner may point inward
    ],
)
def test_outlines(text, expected):
    shape = body(f"shape = 'plate'\nthickness = '2 mm'\noutline = {text}").shape
    assert isinstance(shape, PlateShape)
    if expected is not None:
        assert shape.outline == expected


def test_profiles_of_bars():
    undercut = body(
        "shape = 'bar'\nlength = 0.3\nwidth = '30 mm'\n"
        "profile = [[0, '20 mm'], [0.35, '20 mm'], [0.35, 0.008], "
        "[0.65, 0.008], [0.65, 0.02], ['100 %', 0.02, 0.025]]"
    ).shape
    assert undercut.profile[1:3] == ((0.35, 0.02, 0.03), (0.35, 0.008, 0.03))
    assert undercut.profile[-1] == (1.0, 0.02, 0.025)
    wedge = body("shape = 'bar'\nlength = 1\nwidth = 0.1\nprofile = [[0, 0.05], [1, 0]]").shape
    assert wedge.profile == ((0.0, 0.05, 0.1), (1.0, 0.0, 0.1))


@pytest.mark.parametrize(
    ("profile", "words"),
    [
        ("[[0, 0.02]]", "one entry"),
        ("[[0.1, 0.02], [1, 0.02]]", "runs from 0.1 to 1"),
        ("[[0, 0.02], [0.6, 0.02], [0.5, 0.02], [1, 0.02]]", "comes after"),
        ("[[0, 0.02], [0.5, 0], [1, 0.02]]", "height 0 inside"),
        ("[[0, 0], [1, 0]]", "no height"),
        ("[[0, 0.02], [0, 0.01], [1, 0.02]]", "very end"),
        ("[[0, 1], [0.5, 1], [0.5, 2], [0.5, 3], [1, 1]]", "three times"),
        ("[[0, 0.02, 0], [1, 0.02]]", "out of range"),
    ],
)
def test_impossible_profiles(profile, words):
    with pytest.raises(Exception, match=words):
        body(f"shape = 'bar'\nlength = 1\nwidth = 0.1\nprofile = {profile}")


@pytest.mark.parametrize(
    ("shape", "words"),
    [
        ("shape = 'tube'\nlength = 1\nouter = '25 mm'\nwall = '12.5 mm'", "not below half"),
        ("shape = 'bar'\nlength = 1\ndiameter = '25 mm'\nwidth = '12.5 mm'", "both diameter and width"),
        ("shape = 'bar'\nlength = 1\nwidth = '12.5 mm'", "without height"),
        ("shape = 'bar'\nlength = 1\nprofile = [[0, 1], [1, 1]]", "without width"),
        ("shape = 'bar'\nlength = 1\nwidth = 1\nheight = 3\nprofile = [[0, 1], [1, 1]]", "largest"),
    ],
)
def test_impossible_sections(shape, words):
    with pytest.raises(Exception, match=words):
        body(shape)


def test_supports():
    shape = "shape = 'plate'\nthickness = 0.002\noutline = {rectangle = [1, 1]}\nsupport = "
    entries = body(
        shape + "[{where = ['x-', 'x+'], hold = 'pinned'}, "
        "{where = {point = [0, 0, '10 cm']}, hold = {spring = '2 kN/m', "
        "damper = 3}}, {where = {box = [[0, 0, 0], [1, 1, 1]]}, hold = {fix = ['rx', 'y']}}, "
        "{where = 'z-', hold = {cord = '50 cm'}}]"
    ).support
    assert [entry.where for entry in entries] == [
        NamedPlace(names=("x-", "x+")),
        PointPlace(point_m=(0, 0, 0.1)),
        BoxPlace(low_m=(0, 0, 0), high_m=(1, 1, 1)),
        NamedPlace(names=("z-",)),
    ]
    assert [entry.hold for entry in entries] == [
        NamedHold(kind="pinned"),
        SpringHold(stiffness_n_m=2000, damping_ns_m=3),
        FixHold(axes=("y", "rx")),
        CordHold(length_m=0.5),
    ]
    assert body(shape + "'free'").support == ()


@pytest.mark.parametrize(
    ("shape", "names"),
    [
        ("shape = 'string'\nlength = 1\ndiameter = 0.001\ntension = 80", [("left", "right")]),
        ("shape = 'membrane'\nthickness = 2e-4\ntension = 2000\noutline = {circle = 0.3}", [("edge",)]),
        ("shape = 'bar'\nlength = 1\ndiameter = 0.001", []),
    ],
)
def test_what_holds_a_body_that_names_nothing(shape, names):
    support = body(shape).support
    assert [entry.where.names for entry in support] == names
    assert all(entry.hold == NamedHold(kind="pinned") for entry in support)


def test_edges_of_a_polygon_have_numbers():
    text = "shape = 'plate'\nthickness = 0.01\noutline = {polygon = [[0, 0], [1, 0], [0, 1]]}\n"
    assert body(text + "support = [{where = 'edge3', hold = 'clamped'}]").support[0].where.names == ("edge3",)
    with pytest.raises(Exception, match='"edge4" is not a place'):
        body(text + "support = [{where = 'edge4', hold = 'clamped'}]")


@pytest.mark.parametrize(
    ("turn", "expected"),
    [
        ("{axis = [0, 2, 0], angle = '90 deg'}", (0, math.sqrt(0.5), 0, math.sqrt(0.5))),
        ("[0, 0, 0, 5]", (0, 0, 0, 1)),
        ("[3, 0, 4, 0]", (0.6, 0, 0.8, 0)),
    ],
)
def test_turns(turn, expected):
    assert body(f"shape = 'bar'\nlength = 1\ndiameter = 0.01\nturn = {turn}").turn == pytest.approx(
        expected, abs=1e-15
    )


TIMED = """
[take]
length = {length}
[picture]
rate = {rate}
start = {start}
handles = 24
[[body]]
name = 'pan'
shape = 'bar'
length = 1
diameter = '1 cm'
material = 'steel'
[[strike]]
time = {time}
striker = 'steel ball'
speed = 1
"""


@pytest.mark.parametrize(
    ("rate", "start", "time", "expected"),
    [
        ("24", "1001", "0.5", Fraction(1, 2)),
        ("24", "1001", "'20 ms'", Fraction(1, 50)),
        ("24", "1001", "'1042 f'", Fraction(41, 24)),
        ("24", "1001", "'1042.5 f'", Fraction(83, 48)),
        ("24", "'01:00:00:00'", "'12 f'", Fraction(1, 2)),
        ("'24000/1001'", "'01:00:00:00'", "'01:00:01:12'", Fraction(36 * 1001, 24000)),
        ("'30000/1001 drop'", "'00:00:59;28'", "'00:01:00;02'", Fraction(2 * 1001, 30000)),
        ("25", "'23:59:59:00'", "'00:00:00:05'", Fraction(30, 25)),
        ("25", "'01:00:00:00'", "'-1 f'", Fraction(-1, 25)),
    ],
)
def test_times_are_seconds_after_start(rate, start, time, expected):
    scene = parse_scene(TIMED.format(length=3, rate=rate, start=start, time=time))
    assert scene.strikes[0].time_s == float(expected)


@pytest.mark.parametrize(
    ("length", "rate", "expected"),
    [
        ("3", "24", Fraction(3)),
        ("0.1", "24", Fraction(1, 10)),
        ("'72 f'", "'24000/1001'", Fraction(3003, 1000)),
        ("'00:00:03:00'", "25", Fraction(3)),
        ("'41.7 ms'", "25", Fraction(417, 10000)),
    ],
)
def test_lengths_are_exact(length, rate, expected):
    scene = parse_scene(TIMED.format(length=length, rate=rate, start=100, time=0))
    assert scene.take.length == scene.clock.length == expected
    assert scene.take.length_s == float(expected)


def test_a_timecode_is_refused_when_frames_are_numbered():
    with pytest.raises(Exception, match="the picture starts at frame 1001"):
        parse_scene(TIMED.format(length=3, rate=24, start=1001, time="'01:00:00:00'"))


def test_defaults():
    scene = parse_scene(
        HEAD + "shape = 'tube'\nlength = 1\nouter = 0.02\nwall = 0.001\n", where="landing/bell.toml"
    )
    assert scene.title == "bell"
    assert isinstance(scene.bodies[0].shape, TubeShape)
    assert scene.picture.rate.fraction == 24
    assert scene.picture.shutter_turn == 0.5
    assert scene.clock.start_frame == 86400
    assert (scene.sound.rate_hz, scene.sound.format, scene.sound.full_scale_pa) == (48000, "24-bit", 20.0)
    assert scene.sound.dither is False
    # Standard gravity: 3rd CGPM (1901); standard atmosphere: ISO 2533 (1975).
    assert (scene.world.gravity_m_s2, scene.world.pressure_pa) == (9.80665, 101325.0)
    assert scene.strikes == ()
    assert scene.bodies[0].modes.solved_or_default_hz == 80e3
    assert scene.take.files == ("wav", "curves", "events", "glb", "manifest")


def test_16_bit_is_dithered_unless_told_otherwise():
    tail = "shape = 'bar'\nlength = 1\ndiameter = 0.02\n[sound]\nformat = '16-bit'\n"
    assert parse_scene(HEAD + tail).sound.dither is True
    assert parse_scene(HEAD + tail + "dither = false\n").sound.dither is False


def test_level():
    tail = "shape = 'bar'\nlength = 1\ndiameter = 0.02\n[sound]\nlevel = "
    assert parse_scene(HEAD + tail + "'physical'").sound.level.kind == "physical"
    level = parse_scene(HEAD + tail + "{peak = '-6 dB'}").sound.level
    assert (level.kind, level.db) == ("peak", -6.0)


@pytest.mark.parametrize(
    ("hold", "spring", "damper"),
    [
        ("{damper = '3 N s/m'}", 0.0, 3.0),
        ("{spring = 0, damper = 3}", 0.0, 3.0),
        ("{spring = '1.5 MN/m'}", 1.5e6, 0.0),
        ("{spring = '2 N/mm'}", 2e3, 0.0),
    ],
)
def test_a_spring_or_a_damper_may_stand_alone(hold, spring, damper):
    tail = f"shape = 'bar'\nlength = 1\ndiameter = 0.02\nsupport = {{where = 'left', hold = {hold}}}\n"
    (entry,) = parse_scene(HEAD + tail).bodies[0].support
    assert (entry.hold.stiffness_n_m, entry.hold.damping_ns_m) == (spring, damper)


@pytest.mark.parametrize("name", ["bell rod", "7 of 9", "Bo\u00eete_2-b", "\u092c\u093e\u0932\u091f\u0940", "\u9b5a"])
def test_names_are_of_any_script(name):
    text = HEAD.replace("pan", name) + "shape = 'bar'\nlength = 1\ndiameter = 0.02\n"
    assert parse_scene(text).bodies[0].name == name


def test_the_default_microphone_is_1_m_in_front():
    text = (
        HEAD
        + "shape = 'plate'\noutline = {circle = 0.3}\nthickness = 0.001\nplace = [1, 2, 3]\n"
        + "turn = {axis = [1, 0, 0], angle = '90 deg'}\n"
    )
    (mic,) = parse_scene(text).mics
    # +y turned by 90 degrees about x is +z, and +z is -y.
    assert mic.place_m == pytest.approx((1.36, 1.52, 3.8), abs=1e-15)
    assert mic.pattern == "omni"


@pytest.mark.parametrize(
    ("shape", "middle"),
    [
        ("shape = 'bar'\nlength = 2\ndiameter = 0.01\n", (1, 0, 0)),
        ("shape = 'plate'\nthickness = 0.01\noutline = {polygon = [[1, 1], [3, 1], [1, 5]]}\n", (2, 0, 3)),
        ("shape = 'membrane'\nthickness = 0.01\ntension = 100\noutline = {rectangle = [1, 2]}\n", (0, 0, 0)),
    ],
)
def test_it_stands_1_m_off_the_middle_of_the_body_and_off_its_planes_of_symmetry(shape, middle):
    (mic,) = parse_scene(HEAD + shape).mics
    away = [place - centre for place, centre in zip(mic.place_m, middle, strict=True)]
    assert math.hypot(*away) == pytest.approx(1.0)
    assert min(away) > 0.3
    assert max(away) == away[1]


def test_a_strike_names_its_body_by_name_or_number_and_may_leave_out_the_only_one():
    text = TIMED.format(length=3, rate=24, start=0, time=0).replace("handles = 24\n", "")
    strikes = [
        parse_scene(text.replace("[[strike]]", f"[[strike]]\n{line}")).strikes[0]
        for line in ("", "body = 0", "body = 'pan'")
    ]
    assert [(strike.body, strike.body_index) for strike in strikes] == [("pan", 0)] * 3
    assert strikes[0].spot.name == "centre"


def test_equal_scenes_have_equal_digests_and_others_do_not():
    text = TIMED.format(length=3, rate=24, start=1001, time=0)
    same = parse_scene(text.replace("length = 1\n", "length = '100 cm' # one metre\n"))
    assert parse_scene(text).digest == same.digest
    assert parse_scene(text.replace("speed = 1", "speed = 1.0000001")).digest != same.digest
    assert parse_scene(text.replace("'steel'", "'mild steel'")).digest != same.digest
    assert len(same.digest) == 64


def test_read_scene_reads_what_is_written(tmp_path):
    text = TIMED.format(length=3, rate=24, start=1001, time=0)
    path = tmp_path / "signal loft.toml"
    path.write_bytes(b"\xef\xbb\xbf" + text.replace("\n", "\r\n").encode())  # as some editors save it
    scene = read_scene(path)
    assert scene.title == "signal loft"
    assert scene.where == str(path)
    assert scene.digest == parse_scene(text, where="signal loft.toml").digest


def test_a_scene_is_frozen_and_travels():
    scene = parse_scene(TIMED.format(length=3, rate=24, start=1001, time=0))
    with pytest.raises(ValidationError, match="frozen"):
        scene.title = "other"
    assert pickle.loads(pickle.dumps(scene)) == scene  # noqa: S301 (our own bytes)


def test_models_can_be_made_in_python_with_units_in_their_names():
    made = BodySpec(
        name="pan",
        shape=PlateShape(outline=RectangleOutline(a_m=0.4, b_m=0.3), thickness_m="3 mm"),
        material=material("brass"),
    )
    assert made == body("shape = 'plate'\nthickness = 0.003\noutline = {rectangle = [0.4, 0.3]}")


def test_the_file_knows_only_the_keys_of_the_scene_language():
    with pytest.raises(Exception, match="unknown key 'length_m'"):
        body("shape = 'bar'\nlength_m = 1\nlength = 1\ndiameter = 0.02")


def test_a_scene_cannot_grow_nan_in_its_digest():
    scene = parse_scene(TIMED.format(length=3, rate=24, start=1001, time=0))
    assert "nan" not in json.dumps(scene.world.model_dump()).lower()
