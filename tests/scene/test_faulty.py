"""Faulty scenes: each fault names its line, its key path, what is wrong and how to fix it."""

from __future__ import annotations

import json
import re

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from resonate.errors import SceneError
from resonate.scene.read import parse_scene, read_scene

# A sound scene, line by line; every case replaces one line or adds some at the end.
SOUND = """\
title = "Galley tray"
[take]
length = "2 s"
[picture]
rate = 25
handles = 5
[sound]
rate = "48 kHz"
[[body]]
name = "tray"
shape = "plate"
outline = {rectangle = ["0.4 m", "0.3 m"]}
thickness = "2 mm"
material = "stainless steel"
support = [{where = "x-", hold = "clamped"}]
[[body]]
name = "halyard"
shape = "string"
length = "0.65 m"
diameter = "1 mm"
tension = "80 N"
material = "spring steel"
[[strike]]
body = "tray"
time = "0.5 s"
spot = {fraction = [0.3, 0.4]}
striker = "wooden knob"
speed = "1.5 m/s"
[[mic]]
place = [0, 1, 0]
"""

# old line, new line, key path, line number, words of what, words of fix
CASES = [
    # units and numbers
    ('thickness = "2 mm"', 'thickness = "2 kg"', "body[0].thickness", 13, "'kg' is not a length unit", "mm"),
    ('thickness = "2 mm"', 'thickness = "1,5 mm"', "body[0].thickness", 13, "decimal comma", "point"),
    ('thickness = "2 mm"', "thickness = 0", "body[0].thickness", 13, "0 is out of range", "above 0"),
    ('thickness = "2 mm"', 'thickness = "-2 mm"', "body[0].thickness", 13, '"-2 mm" is out of range',
     "above 0"),
    ('thickness = "2 mm"', "thickness = nan", "body[0].thickness", 13, "not a finite number", "number in m"),
    ('thickness = "2 mm"', "thickness = inf", "body[0].thickness", 13, "not a finite number", "number in m"),
    ('thickness = "2 mm"', "thickness = true", "body[0].thickness", 13, "true is not a length", "1.5 m"),
    ('thickness = "2 mm"', 'thickness = ["2 mm"]', "body[0].thickness", 13, "is not a length", "1.5 m"),
    ('tension = "80 N"', 'tension = "80 N/m"', "body[1].tension", 21, "'N/m' is not a force unit", "kN"),
    ('speed = "1.5 m/s"', "speed = 0", "strike[0].speed", 28, "0 is out of range", "above 0"),
    ('speed = "1.5 m/s"', 'speed = "1e999 m/s"', "strike[0].speed", 28, "not a finite number", "m/s"),
    # misspelling
    ('thickness = "2 mm"', 'thikness = "2 mm"', "body[0].thikness", 13, "did you mean 'thickness'?",
     "outline"),
    ('material = "stainless steel"', 'matrial = "oak"', "body[0].matrial", 14, "did you mean 'material'?",
     "use"),
    ('material = "stainless steel"', 'material = "stanless steel"', "body[0].material", 14,
     "is not a material", "did you mean 'stainless steel'?"),
    ('striker = "wooden knob"', 'striker = "wooden nob"', "strike[0].striker", 27, "is not a striker",
     "did you mean 'wooden knob'?"),
    ('shape = "plate"', 'shape = "plat"', "body[0].shape", 11, "is not a shape", "did you mean 'plate'?"),
    ("[picture]", "[pictures]", "pictures", 4, "did you mean 'picture'?", "picture"),
    ("handles = 5", "handle = 5", "picture.handle", 6, "did you mean 'handles'?", "handles"),
    ('body = "tray"', 'body = "try"', "strike[0].body", 24, 'no body "try"', "did you mean 'tray'?"),
    ('hold = "clamped"', 'hold = "clmaped"', "body[0].support[0].hold", 15, "is not a hold", "'clamped'"),
    # shapes
    ('outline = {rectangle = ["0.4 m", "0.3 m"]}', "outline = {ring = [0.2, 0.3]}",
     "body[0].outline.ring[1]", 12, "inner diameter 0.3 m is not below", "inner < outer"),
    ('outline = {rectangle = ["0.4 m", "0.3 m"]}', "outline = {polygon = [[0, 0], [1, 1], [1, 0], [0, 1]]}",
     "body[0].outline.polygon", 12, "edges 1 and 3 of the polygon cross", "in order"),
    ('outline = {rectangle = ["0.4 m", "0.3 m"]}', "outline = {polygon = [[0, 0], [1, 1], [2, 2]]}",
     "body[0].outline.polygon", 12, "no area", "one line"),
    ('outline = {rectangle = ["0.4 m", "0.3 m"]}', "outline = {polygon = [[0, 0], [0.3, 0], [0.6, 0.001]]}",
     "body[0].outline.polygon[0]", 12, "opens by 0.095 deg", "0.5 deg"),
    ('outline = {rectangle = ["0.4 m", "0.3 m"]}',
     "outline = {polygon = [[0, 0], [0.3, 0], [0.301, 0.4], [0.302, 0], [0.6, 0], [0.6, 0.5], [0, 0.5]]}",
     "body[0].outline.polygon[2]", 12, "opens by 0.29 deg", "0.5 deg"),
    ('outline = {rectangle = ["0.4 m", "0.3 m"]}', "outline = {polygon = [[0, 0], [1, 1]]}",
     "body[0].outline.polygon", 12, "fewer than 3 corners", "at least 3"),
    ('outline = {rectangle = ["0.4 m", "0.3 m"]}', 'outline = {polygon = [[0, 0], [1, "x"], [1, 0]]}',
     "body[0].outline.polygon[1][1]", 12, '"x" is not a length', "1.5 m"),
    ('outline = {rectangle = ["0.4 m", "0.3 m"]}', "outline = {square = 0.3}", "body[0].outline.square", 12,
     "is not an outline", "rectangle"),
    ('outline = {rectangle = ["0.4 m", "0.3 m"]}', "outline = {rectangle = [0.4]}",
     "body[0].outline.rectangle", 12, "is not a rectangle", "[a, b]"),
    ('diameter = "1 mm"', 'diameter = "1 mm"\nwall = "1 mm"', "body[1].wall", 21, "a string has no wall",
     "diameter"),
    ('diameter = "1 mm"', "", "body[1].diameter", 16, "diameter is missing", 'add diameter = "20 mm"'),
    # matter
    ('material = "stainless steel"', "material = {density = 7800, young = 2e11, poisson = 0.5}",
     "body[0].material.poisson", 14, "0.5 is out of range", "below 0.5"),
    ('material = "stainless steel"', "material = {density = 7800, young = [1e9, 2e9, 3e9]}",
     "body[0].material.shear", 14, "shear is missing", "G12, G13, G23"),
    ('material = "stainless steel"',
     "material = {density = 400, young = [1e10, 1e9, 1e9], shear = [1e9, 1e9, 1e8], poisson = [3, 0, 0]}",
     "body[0].material.poisson[0]", 14, "3 is out of range", "below 2"),
    ('material = "stainless steel"',
     "material = {density = 400, young = [1e9, 1e10, 1e9], shear = [1e9, 1e9, 1e8], poisson = [0.9, 0, 0]}",
     "body[0].material.poisson", 14, "unstable", "sqrt(E_i/E_j)"),
    ('material = "stainless steel"', 'material = {from = "bras", loss = 0.004}', "body[0].material.from", 14,
     "is not a material", "did you mean 'brass'?"),
    ('material = "stainless steel"', 'material = {from = "brass", loss = -0.004}', "body[0].material.loss",
     14, "-0.004 is out of range", "at least 0"),
    ('material = "stainless steel"', 'material = {from = "brass", loss = [[500, 0.1], [100, 0.2]]}',
     "body[0].material.loss[1][0]", 14, "100 Hz does not come after 500 Hz", "rising"),
    ('material = "stainless steel"', "material = {young = 2e11}", "body[0].material.density", 14,
     "density is missing", "add density"),
    # supports
    ('where = "x-"', 'where = "left"', "body[0].support[0].where", 15,
     '"left" is not a place on this shape', "x-"),
    ('hold = "clamped"', "hold = {spring = -1}", "body[0].support[0].hold.spring", 15, "-1 is out of range",
     "at least 0"),
    ('hold = "clamped"', "hold = {fix = []}", "body[0].support[0].hold.fix", 15, "fixes nothing",
     "at least one"),
    ('hold = "clamped"', 'hold = {fix = ["x", "w"]}', "body[0].support[0].hold.fix[1]", 15,
     '"w" is not an axis', "rx"),
    ('hold = "clamped"', 'hold = {cord = "0 m"}', "body[0].support[0].hold.cord", 15, "out of range",
     "above 0"),
    ('support = [{where = "x-", hold = "clamped"}]', 'support = "clamped"', "body[0].support", 15,
     "does not say where", 'hold = "clamped"'),
    ('material = "spring steel"', 'material = "spring steel"\nsupport = "free"', "body[1].support", 23,
     "a string under tension that nothing holds", "pinned"),
    ('{where = "x-", hold = "clamped"}', '{where = "x-", hold = "pinned"}, {where = "x-", hold = "guided"}',
     "body[0].support[1].where", 15, "held twice", "one entry"),
    # happenings
    ('time = "0.5 s"', 'time = "-1 s"', "strike[0].time", 25, "before the take begins", "into the take"),
    ('time = "0.5 s"', "time = 2.2", "strike[0].time", 25, "after the take ends", "into the take"),
    ('time = "0.5 s"', 'time = "00:00:00;00"', "strike[0].time", 25, "drop-frame label", '":"'),
    ('time = "0.5 s"', 'time = "soon"', "strike[0].time", 25, "is not a time", "1.5 s"),
    ("spot = {fraction = [0.3, 0.4]}", 'spot = "rim"', "strike[0].spot", 26, "is not a spot of this plate",
     "centre"),
    ("spot = {fraction = [0.3, 0.4]}", "spot = {fraction = [0.3, 1.4]}", "strike[0].spot.fraction[1]", 26,
     "1.4 is out of range", "at most 1"),
    ("spot = {fraction = [0.3, 0.4]}", "spot = {fraction = 0.3}", "strike[0].spot.fraction", 26,
     "1 fraction on a plate", "[u, v]"),
    ("spot = {fraction = [0.3, 0.4]}", "spot = {toward = [0, 0, 0]}", "strike[0].spot.toward", 26,
     "has no direction", "not zero"),
    ("spot = {fraction = [0.3, 0.4]}", "spot = {point = [0, 0, 0], toward = [0, 1, 0]}", "strike[0].spot", 26,
     "exactly one", "centre"),
    ('striker = "wooden knob"', 'striker = {from = "cork", restitution = 1.2}',
     "strike[0].striker.restitution", 27, "1.2 is out of range", "at most 1"),
    ('striker = "wooden knob"', "", "strike[0].striker", 23, "striker is missing", "add striker"),
    # the frame of the scene
    ('length = "2 s"', "length = 0", "take.length", 3, "0 is no length", "above 0"),
    ('length = "2 s"', 'length = "4e7 s"', "take.length", 3, "a 1e+09-frame take", "shorten"),
    ('length = "2 s"', 'length = "2 s"\nseed = -1', "take.seed", 4, "-1 is not allowed", "from 0"),
    ('length = "2 s"', "", "take.length", 2, "length is missing", "add length"),
    ("rate = 25", "rate = 23", "picture.rate", 5, "23 is not a frame rate", "24000/1001"),
    ("handles = 5", 'handles = 5\nstart = "25:00:00:00"', "picture.start", 7, "outside 23:59:59:24",
     "hours to 23"),
    ("handles = 5", "handles = 5\nstart = 3", "picture.handles", 6, "begin before frame 0", "fewer handles"),
    ("handles = 5", 'handles = 2160001\nstart = "00:00:00:00"', "picture.handles", 6, "not allowed here", "1000000"),
    ("handles = 5", 'handles = 5\nshutter = "400 deg"', "picture.shutter", 7, "out of range", "360 deg"),
    ("handles = 5", 'handles = 5\nup = "x"', "picture.up", 7, '"x" is not allowed', "y, z"),
    ('rate = "48 kHz"', 'rate = "47 kHz"', "sound.rate", 8, "is not a sample rate", "44.1, 48"),
    ('rate = "48 kHz"', 'rate = "44.1 kHz"\nformat = "32-bit"', "sound.format", 9, "is not allowed",
     "24-bit"),
    ('name = "halyard"', 'name = "tray"', "body[1].name", 17, "taken by body[0]", "own name"),
    ('name = "halyard"', 'name = ""', "body[1].name", 17, "is not a name", "not empty"),
    ('name = "halyard"', 'name = "a/b"', "body[1].name", 17, "cannot name", "letters"),
    ('name = "halyard"', 'name = "=cmd()"', "body[1].name", 17, "cannot name", "letters"),
    ('name = "halyard"', 'name = "@sum"', "body[1].name", 17, "cannot name", "begin with a letter or a digit"),
    ('name = "halyard"', 'name = "-1+1"', "body[1].name", 17, "cannot name", "begin with a letter or a digit"),
    ('name = "halyard"', 'name = "a=b(c)"', "body[1].name", 17, "cannot name", "letters"),
    ('name = "halyard"', """name = "a'b" """, "body[1].name", 17, "cannot name", "letters"),
    ('support = [{where = "x-", hold = "clamped"}]', 'support = [{where = "x-", hold = {spring = 0}}]',
     "body[0].support[0].hold", 15, "holds nothing", "a damper"),
    ('support = [{where = "x-", hold = "clamped"}]', 'support = [{where = "x-", hold = {damper = -1}}]',
     "body[0].support[0].hold.damper", 15, "-1 is out of range", "at least 0"),
    ('name = "halyard"', 'name = "halyard"\nmodes = {heard = "30 kHz"}', "body[1].modes.heard", 18,
     "above half the rate", "lower heard"),
    ('name = "halyard"', 'name = "halyard"\nmodes = {heard = 2e4, solved = 1e4}', "body[1].modes.solved", 18,
     "is not above heard", "raise solved"),
    ('name = "halyard"', 'name = "halyard"\nturn = [0, 0, 0, 0]', "body[1].turn", 18, "no direction",
     "[0, 0, 0, 1]"),
    ('name = "halyard"', 'name = "halyard"\nturn = {axis = [0, 0, 0], angle = 1}', "body[1].turn.axis", 18,
     "no direction", "not zero"),
    ('name = "halyard"', 'name = "halyard"\nplace = [0, 1]', "body[1].place", 18, "not a list of 3",
     "3 values"),
    ('name = "halyard"', 'name = "halyard"\nheld = true\nspeed = [1, 0, 0]', "body[1].speed", 19,
     "a held body", "remove speed"),
    ('name = "halyard"', 'name = "halyard"\nheld = "yes"', "body[1].held", 18, "neither true nor false",
     "quotes"),
    ("[[mic]]", "[mic]", "mic", 29, "is not a list of tables", "[[mic]]"),
    ("place = [0, 1, 0]", "", "mic[0].place", 29, "place is missing", "add place"),
    # what later versions do
    ('shape = "plate"', 'shape = "sheet"', "body[0].shape", 11, "not in this version", "membrane"),
    ('length = "2 s"', 'length = "2 s"\nfiles = ["wav", "usd"]', "take.files[1]", 4, "not in this version",
     "curves"),
    ('rate = "48 kHz"', 'rate = "48 kHz"\nhead = "hit"', "sound.head", 9, "not in this version", "picture"),
    ('rate = "48 kHz"', 'rate = "48 kHz"\ntail = "-90 dB"', "sound.tail", 9, "not in this version", "keep"),
    ('rate = "48 kHz"', 'rate = "48 kHz"\nstems = "hit"', "sound.stems", 9, "not in this version", "none"),
    ('rate = "48 kHz"', 'rate = "48 kHz"\nlevel = {loudness = -23}', "sound.level.loudness", 9,
     "not in this version", "peak"),
    ('speed = "1.5 m/s"', "speed = 1\nstays = true", "strike[0].stays", 29, "not in this version", "leaves"),
    ("place = [0, 1, 0]", 'place = [0, 1, 0]\npattern = "cardioid"', "mic[0].pattern", 31,
     "not in this version", "omni"),
    ("place = [0, 1, 0]", "array = {kind = 'pair'}", "mic[0].array", 30, "not in this version",
     "single microphones"),
    ("place = [0, 1, 0]", "place = [0, 1, 0]\n[ground]\nheight = 0", "ground", 31, "not in this version",
     "remove"),
    ("place = [0, 1, 0]", "place = [0, 1, 0]\n[vary]\ncount = 9", "vary", 31, "not in this version",
     "remove"),
    ("place = [0, 1, 0]", "place = [0, 1, 0]\n[[pluck]]\nbody = 0", "pluck", 31, "not in this version",
     "remove"),
]  # fmt: skip


def faults_of(text):
    with pytest.raises(SceneError) as caught:
        parse_scene(text, where="galley.toml")
    return caught.value.faults


def test_the_scene_they_start_from_is_sound():
    scene = parse_scene(SOUND)
    assert [body.name for body in scene.bodies] == ["tray", "halyard"]


@pytest.mark.parametrize(
    ("old", "new", "path", "line", "what", "fix"), CASES, ids=[case[2] for case in CASES]
)
def test_each_fault_is_named_once_with_place_reason_and_cure(old, new, path, line, what, fix):
    assert SOUND.count(old) == 1
    (fault,) = faults_of(SOUND.replace(old, new))
    assert fault.where == f"galley.toml:{line}: {path}"
    assert what in fault.what
    assert fix in fault.fix


def test_all_faults_of_a_file_come_at_once_in_its_order():
    kept = [case for case in CASES if "\n" not in case[1] and case[1] and case[0].count("\n") == 0]
    chosen, used = [], set()
    for case in kept:  # one fault a line; without a sound shape its spots could not be told
        if case[3] not in {*used, 11, 12, 13} and case[2] not in ("pictures", "strike[0].body", "mic"):
            chosen.append(case)
            used.add(case[3])
    text = SOUND
    for case in chosen:
        text = text.replace(case[0], case[1])
    # A sound length keeps the strike's time checkable.
    faults = faults_of(text)
    found = [fault.where for fault in faults]
    lines = [int(re.search(r":(\d+)", where).group(1)) for where in found]
    assert len(chosen) >= 12
    assert lines == sorted(lines)
    for case in chosen:
        if case[2] != "strike[0].time":  # without a sound take there is no end to compare with
            assert f"galley.toml:{case[3]}: {case[2]}" in found


def test_the_text_of_the_error_holds_every_fault():
    with pytest.raises(SceneError) as caught:
        parse_scene(SOUND.replace('"2 mm"', '"2 kg"').replace('"wooden knob"', '"wood"'), where="galley.toml")
    assert str(caught.value).count("fix:") == 2
    assert "galley.toml:13: body[0].thickness" in str(caught.value)
    assert caught.value.exit_code == 2


@pytest.mark.parametrize(
    ("text", "line", "what"),
    [
        ("", 1, "empty"),
        ("  \n\n", 1, "empty"),
        ('title = "x', 1, "not TOML"),
        ("[take]\nlength = \n", 2, "not TOML"),
        ("[take]\nlength = 1\nlength = 2\n", 3, "not TOML"),
        ("x = [1,\n2\n", 2, "not TOML"),
        ("x = " + "9" * 5000, 1, "not TOML"),
        ("x = " + "[" * 5000 + "]" * 5000, 1, "nested too deeply"),
    ],
)
def test_text_that_is_not_toml_carries_its_line(text, line, what):
    (fault,) = faults_of(text)
    assert re.match(rf"galley\.toml:{line}\b", fault.where)
    assert what in fault.what
    assert fault.fix


def test_no_body():
    (fault,) = faults_of("[take]\nlength = 1\n")
    assert "no body" in fault.what
    assert "[[body]]" in fault.fix


def test_files_that_cannot_be_read(tmp_path):
    with pytest.raises(SceneError, match="no such file") as caught:
        read_scene(tmp_path / "nowhere.toml")
    assert "nowhere.toml" in caught.value.faults[0].where
    with pytest.raises(SceneError, match="folder"):
        read_scene(tmp_path)
    (tmp_path / "latin.toml").write_bytes(b'title = "ok"\nname = "caf\xe9"\n')
    with pytest.raises(SceneError, match="UTF-8") as caught:
        read_scene(tmp_path / "latin.toml")
    assert caught.value.faults[0].where.endswith("latin.toml:2")
    (tmp_path / "empty.toml").write_bytes(b"")
    with pytest.raises(SceneError, match="empty"):
        read_scene(tmp_path / "empty.toml")
    with pytest.raises(SceneError, match="cannot be read|no such file"):
        read_scene("bad\0name.toml")


VALUES = st.recursive(
    st.sampled_from(
        ["0", "-1", "nan", "-inf", "1e308", "true", '""', '"x"', "'3 mm'", "'free'", "07:32:00", "1979-05-27"]
    )
    | st.integers().map(str)
    | st.text(max_size=8).map(
        lambda text: json.dumps(text.encode("utf-8", "ignore").decode().replace("\x7f", ""))
    ),
    lambda inner: (
        st.lists(inner, max_size=4).map(lambda items: "[" + ", ".join(items) + "]")
        | st.dictionaries(
            st.sampled_from(
                [
                    "kind",
                    "from",
                    "fix",
                    "spring",
                    "point",
                    "box",
                    "rectangle",
                    "polygon",
                    "axis",
                    "peak",
                    "bar",
                ]
            ),
            inner,
            max_size=3,
        ).map(lambda table: "{" + ", ".join(f"{key} = {value}" for key, value in table.items()) + "}")
    ),
    max_leaves=8,
)
KEYS = sorted(
    {line.split(" = ")[0] for line in SOUND.splitlines() if " = " in line} | {"turn", "show", "level", "mic"}
)


@settings(max_examples=300, deadline=None)
@given(line=st.integers(0, SOUND.count("\n") - 1), key=st.sampled_from(KEYS), value=VALUES)
def test_whatever_stands_in_a_line_is_read_or_refused_in_full(line, key, value):
    lines = SOUND.splitlines()
    lines[line] = f"{key} = {value}"
    try:
        parse_scene("\n".join(lines), where="galley.toml")
    except SceneError as error:
        for fault in error.faults:
            assert re.match(r"galley\.toml:\d+", fault.where)
            assert fault.what
            assert fault.fix
            assert "cannot be used here" not in fault.what  # a reason of our own, not the validator's


@pytest.mark.parametrize("kind", ["[]", "{}", "3", "[[1]]", "true"])
@pytest.mark.parametrize("key", ["shape", "outline"])
def test_a_kind_that_is_no_word_is_refused(key, kind):
    rest = {"shape": "", "outline": 'shape = "plate"\nthickness = 0.002\n'}[key]
    text = f'[take]\nlength = 1\n[[body]]\nname = "lid"\nmaterial = "brass"\n{rest}{key} = {{kind = {kind}}}\n'
    with pytest.raises(SceneError) as caught:
        parse_scene(text, where="galley.toml")
    assert all(fault.what and fault.fix for fault in caught.value.faults)
