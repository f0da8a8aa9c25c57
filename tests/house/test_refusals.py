"""Bad input through the real command line: what is wrong, where, how to fix it; exit 2, and nothing left behind.

Every row is another fault. What was said is printed as a table at the end of the test run.
"""

from __future__ import annotations

import errno
import os
import re
import signal
import time

import pytest

SCENE = """\
title = "Galley tray"
[take]
length = "0.4 s"
[picture]
rate = 25
[[body]]
name = "tray"
shape = "plate"
outline = {rectangle = ["240 mm", "160 mm"]}
thickness = "3 mm"
material = "steel"
support = [{where = "x-", hold = "clamped"}]
modes = {heard = "3 kHz", solved = "6 kHz", most = 20}
[[body]]
name = "wire"
shape = "string"
length = "600 mm"
diameter = "1 mm"
tension = "120 N"
material = "spring steel"
place = [0, 0, 1]
modes = {heard = "3 kHz", solved = "6 kHz", most = 20}
[[strike]]
body = "tray"
time = "0.1 s"
spot = {fraction = [0.7, 0.4]}
striker = "wooden knob"
speed = "0.6 m/s"
"""
SUPPORT = 'support = [{where = "x-", hold = "clamped"}]'
SPEED = 'speed = "0.6 m/s"'

# fault, line of the scene above, what stands there instead, where it is said to be, words of what and fix
WRITTEN = [
    ("a unit of another kind", 'thickness = "3 mm"', 'thickness = "3 kg"', ":10: body[0].thickness", "not a length unit"),
    ("a decimal comma", 'thickness = "3 mm"', 'thickness = "1,5 mm"', ":10: body[0].thickness", "decimal comma"),
    ("a misspelt key", 'thickness = "3 mm"', 'thicknes = "3 mm"', ":10: body[0].thicknes", "did you mean 'thickness'?"),
    ("zero thickness", 'thickness = "3 mm"', "thickness = 0", ":10: body[0].thickness", "above 0"),
    ("not a number", 'thickness = "3 mm"', "thickness = nan", ":10: body[0].thickness", "not a finite number"),
    ("a plate thicker than wide", 'thickness = "3 mm"', 'thickness = "300 mm"', ":6: body[0]", "thinner or wider"),
    ("no such material", 'material = "steel"', 'material = "stel"', ":11: body[0].material", "did you mean 'steel'?"),
    ("an impossible material", 'material = "steel"', "material = {density = 7800, young = 2e11, poisson = 0.6}",
     ":11: body[0].material.poisson", "below 0.5"),
    ("a hold without a place", SUPPORT, 'support = "clamped"', ":12: body[0].support", "does not say where"),
    ("an edge of another shape", SUPPORT, 'support = [{where = "left", hold = "pinned"}]',
     ":12: body[0].support[0].where", "Allowed: x-"),
    ("an edge held twice", SUPPORT, 'support = [{where = "x-", hold = "pinned"}, {where = "x-", hold = "guided"}]',
     ":12: body[0].support[1].where", "held twice"),
    ("a support off the body", SUPPORT, 'support = [{where = {point = [5, 0, 0]}, hold = "pinned"}]',
     ":12: body[0].support[0].where", "4.88 m off the body"),
    ("a support of nothing", SUPPORT, 'support = [{where = {box = [[5, 5, 5], [6, 6, 6]]}, hold = "pinned"}]',
     ":12: body[0].support[0].where", "box larger"),
    ("a support of everything", SUPPORT, 'support = [{where = {box = [[-1, -1, -1], [1, 1, 1]]}, hold = "clamped"}]',
     ":6: body[0]", "nothing is left to ring"),
    ("a damper that holds nothing", SUPPORT, 'support = [{where = "x-", hold = {damper = 2}}]', ":6: body[0]",
     "a damper alone does not keep"),
    ("a corner too thin", 'outline = {rectangle = ["240 mm", "160 mm"]}',
     "outline = {polygon = [[0, 0], [0.3, 0], [0.6, 0.001]]}", ":9: body[0].outline.polygon[0]", "opens by 0.095 deg"),
    ("a string without tension", 'tension = "120 N"', "tension = 0", ":19: body[1].tension", "above 0"),
    ("a string without supports", "place = [0, 0, 1]", 'place = [0, 0, 1]\nsupport = "free"', ":22: body[1].support",
     "nothing holds"),
    ("a place beyond reason", "place = [0, 0, 1]", "place = [0, 0, 1e300]", ":21: body[1].place[2]", "out of range"),
    ("two bodies of one name", 'name = "wire"', 'name = "tray"', ":15: body[1].name", "taken by body[0]"),
    ("a shape not there yet", 'shape = "string"', 'shape = "sheet"', ":16: body[1].shape", "not in this version"),
    ("a strike on no body", 'body = "tray"', 'body = "try"', ":24: strike[0].body", "did you mean 'tray'?"),
    ("a strike before the start", 'time = "0.1 s"', 'time = "-1 s"', ":25: strike[0].time", "before the take begins"),
    ("a strike after the end", 'time = "0.1 s"', 'time = "9 s"', ":25: strike[0].time", "after the take ends"),
    ("a strike off the body", "spot = {fraction = [0.7, 0.4]}", "spot = {point = [1, 0, 0]}", ":26: strike[0].spot",
     "0.88 m off the body"),
    ("a blow away from the surface", SPEED, f"{SPEED}\ndirection = [0, 1, 0]", ":29: strike[0].direction",
     "points away from the surface"),
    ("a blow along the surface", SPEED, f"{SPEED}\ndirection = [1, -1e-9, 0]", ":29: strike[0].direction",
     "only grazes the surface at the spot: 5.7e-08 deg into it"),
    ("a microphone inside", SPEED, f"{SPEED}\n[[mic]]\nplace = [0.1, 0, 0]", ":30: mic[0].place", "of 'tray'"),
    ("a support off a wire", "place = [0, 0, 1]", 'support = {where = {point = [0.3, 9, 0]}, hold = "pinned"}',
     ":21: body[1].support", "8.9995 m off the body"),
    ("a blow at no speed", SPEED, "speed = 0", ":28: strike[0].speed", "above 0"),
    ("no such striker", 'striker = "wooden knob"', 'striker = "woden knob"', ":27: strike[0].striker", "wooden knob"),
    ("a take of a billion frames", 'length = "0.4 s"', 'length = "4e7 s"', ":3: take.length", "1e+09-frame take"),
    ("no frame rate", "rate = 25", "rate = 24.5", ":5: picture.rate", "24000/1001"),
    ("louder than full scale", SPEED, f'{SPEED}\n[sound]\nfull_scale = "1e-6 Pa"', "[sound] full_scale", "full_scale"),
    ("a table of a later version", "[[strike]]", "[[pluck]]", ":23: pluck", "not in this version"),
    ("a bracket missing", "[[strike]]", "[[strike]", ":23", "not TOML"),
]  # fmt: skip


def spoken(outcome):
    """Where, what and fix of each fault on stderr."""
    return re.findall(r"^(\S.*)\n  what: (.+)\n  fix:  (.+)$", outcome.err, re.MULTILINE)


@pytest.fixture
def refused(shell, request):
    """Checks one refusal and keeps it for the table."""

    def check(outcome, *, fault, where, words, left):
        assert outcome.code == 2, outcome.err
        assert "Traceback" not in outcome.err
        assert outcome.out == ""
        (said,) = spoken(outcome)
        assert where in said[0]
        assert words in f"{said[1]} {said[2]}"
        assert sorted(entry.name for entry in shell.folder.rglob("*")) == sorted(left)
        request.config.stash.setdefault(request.config.faulty, []).append((fault, *said))

    return check


def write(shell, text, name="tray.toml"):
    (shell.folder / name).write_text(text, encoding="utf-8")


@pytest.mark.parametrize(("fault", "old", "new", "where", "words"), WRITTEN, ids=[row[0] for row in WRITTEN])
def test_a_fault_of_the_scene(shell, refused, fault, old, new, where, words):
    assert SCENE.count(old) == 1
    write(shell, SCENE.replace(old, new))
    outcome = shell.run("take", "tray.toml", "--out", "takes")
    where = where if where.startswith("[") else f"tray.toml{where}"
    refused(outcome, fault=fault, where=where, words=words, left=["tray.toml"])


def test_the_scene_they_start_from_is_sound(shell):
    write(shell, SCENE)
    assert shell.run("take", "tray.toml").code == 0
    assert shell.run("check", "Galley tray").code == 0


FILES = [
    ("an empty file", b"", ":1", "empty"),
    ("a binary file", bytes(range(256)) * 40, ":2", "not UTF-8"),
    ("another encoding", SCENE.replace("tray", "caf\u00e9").encode("latin-1"), ":1", "save the file as UTF-8"),
    ("two bytes a letter", SCENE.encode("utf-16"), ":1", "not UTF-8"),
    ("a huge file", b"# padding\n" * 900_000, "", "larger than 8 MB"),
    ("no scene at all", b"title = 'x'\n[take]\nlength = 1\n", "", "add a [[body]]"),
]


@pytest.mark.parametrize(("fault", "content", "where", "words"), FILES, ids=[row[0] for row in FILES])
def test_a_fault_of_the_file(shell, refused, fault, content, where, words):
    (shell.folder / "tray.toml").write_bytes(content)
    outcome = shell.run("take", "tray.toml")
    refused(outcome, fault=fault, where=f"tray.toml{where}", words=words, left=["tray.toml"])


def test_no_such_file(shell, refused):
    outcome = shell.run("take", "tray.toml")
    refused(outcome, fault="no such file", where="tray.toml", words="no such file", left=[])


def test_a_folder_instead_of_a_file(shell, refused):
    (shell.folder / "tray.toml").mkdir()
    outcome = shell.run("take", "tray.toml")
    refused(outcome, fault="a folder as a scene", where="tray.toml", words="a folder", left=["tray.toml"])


def test_an_existing_take_stays(shell, refused):
    write(shell, SCENE)
    (shell.folder / "Galley tray").mkdir()
    outcome = shell.run("take", "tray.toml")
    refused(outcome, fault="an existing take", where="Galley tray", words="--replace", left=["Galley tray", "tray.toml"])


def test_a_folder_of_other_things_is_not_replaced(shell, refused):
    write(shell, SCENE)
    (shell.folder / "Galley tray").mkdir()
    (shell.folder / "Galley tray" / "recipes.txt").write_text("stew")
    outcome = shell.run("take", "tray.toml", "--replace")
    left = ["Galley tray", "recipes.txt", "tray.toml"]
    refused(outcome, fault="a folder of other things", where="Galley tray", words="recipes.txt", left=left)


def test_a_file_where_the_folder_should_be(shell, refused):
    write(shell, SCENE)
    (shell.folder / "takes").write_text("")
    outcome = shell.run("take", "tray.toml", "--out", "takes")
    left = ["takes", "tray.toml"]
    refused(outcome, fault="a file as --out", where="Galley tray", words="not a folder", left=left)


# Nobody is kept out of a folder who runs as root: then the system's answer is put in its mouth.
DENIED = """
import os
real = os.mkdir
def mkdir(path, *more, **named):
    if ".partial-" in str(path):
        raise PermissionError(13, "Permission denied", str(path))
    return real(path, *more, **named)
os.mkdir = mkdir
"""


def test_an_unwritable_folder(shell, refused):
    write(shell, SCENE)
    closed = shell.folder / "closed"
    closed.mkdir(mode=0o500)
    root = getattr(os, "geteuid", lambda: 0)() == 0
    outcome = shell.run("take", "tray.toml", "--out", "closed", before=DENIED if root else "")
    left = ["closed", "tray.toml"]
    refused(outcome, fault="an unwritable folder", where="closed", words="cannot be written", left=left)


# The disk fills up while the files are written through to it.
FULL = f"""
import os
def fsync(descriptor):
    raise OSError({errno.ENOSPC}, os.strerror({errno.ENOSPC}))
os.fsync = fsync
"""


def test_a_full_disk(shell, refused):
    write(shell, SCENE)
    outcome = shell.run("take", "tray.toml", "--out", "takes", before=FULL)
    refused(outcome, fault="a full disk", where="Galley tray", words="disk is full", left=["tray.toml"])


@pytest.mark.skipif(os.name == "nt", reason="no such limit there")
def test_a_limit_on_the_size_of_files(shell, refused):
    write(shell, SCENE)
    assert shell.run("modes", "tray.toml").code == 0  # into the store, which has its own files
    # 0.4 s of 24 bit at 48 kHz are 57,600 bytes.
    limit = "import resource; resource.setrlimit(resource.RLIMIT_FSIZE, (40_000, 40_000))"
    outcome = shell.run("take", "tray.toml", before=limit)
    fault = "files larger than allowed"
    refused(outcome, fault=fault, where="Galley tray", words="cannot be written", left=["tray.toml"])


def building(shell, process):
    """Wait until a run has begun to build its take."""
    while not list(shell.folder.glob("*.partial-*")):
        assert process.poll() is None
        time.sleep(0.01)


@pytest.mark.skipif(os.name == "nt", reason="folders have no locks there, and no such signal")
def test_two_runs_of_one_take_and_a_killed_run(shell, refused):
    write(shell, SCENE.replace('"0.4 s"', '"900 s"'))
    process = shell.start("take", "tray.toml")
    building(shell, process)
    time.sleep(0.3)  # between making the folder and locking it, anybody may take it
    process.send_signal(signal.SIGSTOP)
    (partial,) = shell.folder.glob("*.partial-*")
    left = [entry.name for entry in shell.folder.rglob("*")]
    outcome = shell.run("take", "tray.toml")
    refused(outcome, fault="another run builds it", where=partial.name, words="another run", left=left)
    process.kill()
    process.communicate()
    assert partial.exists()  # a killed run cannot tidy up; the next one does
    write(shell, SCENE)
    assert shell.run("take", "tray.toml").code == 0
    assert sorted(entry.name for entry in shell.folder.iterdir()) == ["Galley tray", "tray.toml"]
    assert shell.run("check", "Galley tray").code == 0


def test_every_fault_of_a_file_is_told_at_once(shell):
    faulty = [row for row in WRITTEN if re.match(r":\d+: ", row[3]) and row[0] != "a table of a later version"]
    text, lines = SCENE, set()
    for _, old, new, where, _ in faulty:
        line = int(where[1:].partition(":")[0])
        if "\n" not in new and line not in lines and old in text and line not in (3, 5, 16, 24, 26):
            text, lines = text.replace(old, new), lines | {line}
    write(shell, text)
    said = spoken(shell.run("modes", "tray.toml"))
    assert len(lines) >= 8
    assert {int(where.split(":")[1]) for where, _, _ in said} == lines


def test_every_misfit_of_a_scene_is_told_at_once(shell):
    text = SCENE.replace(SUPPORT, 'support = [{where = {point = [5, 0, 0]}, hold = "pinned"}]')
    text = text.replace("spot = {fraction = [0.7, 0.4]}", "spot = {point = [1, 0, 0]}")
    text += '[[strike]]\nbody = "wire"\ntime = 0.1\nstriker = "wooden knob"\nspeed = 1\ndirection = [0, 1, 0]\n'
    text += "[[mic]]\nplace = [0, 0, 0]\n[[mic]]\nplace = [0.3, 0, 1]\n"
    write(shell, text)
    places = [
        "tray.toml:12: body[0].support[0].where",
        "tray.toml:26: strike[0].spot",
        "tray.toml:34: strike[1].direction",
        "tray.toml:36: mic[0].place",
        "tray.toml:38: mic[1].place",
    ]
    for command in ("take", "modes"):
        outcome = shell.run(command, "tray.toml")
        assert outcome.code == 2
        assert [where for where, _, _ in spoken(outcome)] == places
    assert [entry.name for entry in shell.folder.iterdir()] == ["tray.toml"]


def test_a_turning_body_is_struck_as_it_stands_then(shell):
    # Half a turn about x in 0.1 s brings the lower side up: only the run knows, and says which strike.
    text = SCENE.replace(SUPPORT, "floating = true\nspin = [31.4159265, 0, 0]")
    text = text.replace('striker = "wooden knob"', 'striker = "wooden knob"\ndirection = [0, -1, 0]')
    write(shell, text)
    outcome = shell.run("take", "tray.toml")
    assert outcome.code == 2
    ((where, what, _),) = spoken(outcome)
    assert where == "tray.toml:24: strike[0]"
    assert "points away" in what
    write(shell, text.replace("direction = [0, -1, 0]", "direction = [0, 1, 0]"))
    assert shell.run("take", "tray.toml").code == 0


def test_a_store_that_cannot_be_written_is_only_a_warning(shell):
    write(shell, SCENE)
    (shell.folder / "store").write_text("a file where the folder should be")
    outcome = shell.run("take", "tray.toml", environment={"RESONATE_CACHE": str(shell.folder / "store")})
    assert outcome.code == 0
    assert "RESONATE_CACHE" in outcome.err
    assert "Traceback" not in outcome.err


def test_there_are_enough_faults():
    assert len({row[0] for row in [*WRITTEN, *FILES]}) >= 30
