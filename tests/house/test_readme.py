"""The README tells the truth: every command, option and key is in it, and what it shows works."""

from __future__ import annotations

import json
import re
import shutil
import subprocess
import sys
import tomllib
from pathlib import Path
from typing import Literal, get_args, get_origin

import click
import pytest

from resonate.cli import commands
from resonate.errors import SceneError
from resonate.scene import model as models
from resonate.scene.faults import keys_of
from resonate.scene.kinds import Part
from resonate.scene.read import parse_scene
from resonate.take.make import ENDINGS

ROOT = Path(__file__).resolve().parents[2]
README = (ROOT / "README.md").read_text(encoding="utf-8")
FENCED = re.compile(r"^```(\w+)\n(.*?)^```$", re.MULTILINE | re.DOTALL)
PROSE = FENCED.sub("", README)


def spans(text):
    """Words that stand in code letters."""
    return {word for span in re.findall(r"`([^`]+)`", text) for word in re.findall(r"[A-Za-z_][\w-]*|--[\w-]+", span)}


def rows(heading):
    """First cell and rest of each row of the tables below a heading."""
    part = re.search(rf"^#+ {re.escape(heading)}\n(.*?)(?=^#+ |\Z)", PROSE, re.MULTILINE | re.DOTALL)
    assert part, f"no heading {heading!r}"
    lines = [line for line in part.group(1).splitlines() if line.startswith("| ") and not line.startswith("| ---")]
    # A stroke inside code letters is no border.
    cells = [re.split(r"(?<!\\)\|", line.strip("|")) for line in lines]
    return [[cell.strip() for cell in row] for row in cells]


@pytest.mark.parametrize("name", sorted(commands.commands))
def test_every_command_and_option_is_described(name):
    (row,) = [row for row in rows("Commands") if row[0].startswith(f"`resonate {name}")]
    options = [option for option in commands.commands[name].params if isinstance(option, click.Option)]
    long = {opt for option in options for opt in option.opts if opt.startswith("--")}
    described = {word for cell in row for word in re.findall(r"--[\w-]+", cell)}
    assert described == long
    arguments = [item.make_metavar(click.Context(commands)) for item in commands.commands[name].params]
    for metavar in arguments[: len(arguments) - len(options)]:
        assert all(word in row[0] for word in metavar.strip("[]").split("|"))


def test_what_holds_for_all_commands_is_described():
    assert {"--debug", "--version", "--help"} <= spans(PROSE)
    described = re.search(r"Exit codes: (.*)\.", README).group(1)
    assert re.findall(r"\d+", described) == ["0", "1", "2", "3", "130"]


TABLES = {
    "`title` and `[take]`": models.TakeSpec,
    "`[picture]`": models.PictureSpec,
    "`[sound]`": models.SoundSpec,
    "`[world]`": models.WorldSpec,
    "`[[body]]`": models.BodySpec,
    "`[[strike]]`": models.StrikeSpec,
    "`[[mic]]`": models.MicSpec,
}


@pytest.mark.parametrize("heading", TABLES)
def test_every_key_of_a_table_has_its_row(heading):
    described = set().union(*(spans(row[0]) for row in rows(heading)))
    known = set(keys_of(TABLES[heading])) | ({"title"} if "take" in heading else set())
    assert known <= described
    # The sizes of shapes and the holds have tables of their own below the body's.
    assert heading == "`[[body]]`" or described == known


def parts(model=Part):
    """All models of a scene."""
    for below in model.__subclasses__():
        yield below
        yield from parts(below)


@pytest.mark.parametrize("model", sorted(set(parts()), key=lambda model: model.__name__), ids=lambda m: m.__name__)
def test_every_key_and_word_of_the_scene_language_is_described(model):
    spoken = {"Scene": set(), "NamedPlace": set(), "BoxPlace": {"box"}, "LevelSpec": {"peak"}}
    # What is written as a list has names only inside: {rectangle = [a, b]}.
    spoken |= {"RectangleOutline": {"rectangle"}, "CircleOutline": {"circle"}, "RingOutline": {"ring"}}
    spoken |= {"PolygonOutline": {"polygon"}}
    keys = spoken.get(model.__name__, set(keys_of(model)) - {"kind"})
    assert keys - spans(PROSE) == set()
    for field in model.model_fields.values():
        kinds = [field.annotation, *get_args(field.annotation)]
        for kind in kinds:
            words = get_args(kind) if get_origin(kind) is Literal else ()
            assert [word for word in words if not re.search(rf"[`\"{{]{re.escape(str(word))}\b", README)] == []


# The least that a scene must say, in the order of the tables.
REQUIRED = {
    "`title` and `[take]`": {"length": '"1 s"'},
    "`[[body]]`": {"name": '"pan"', "shape": '"bar"\nlength = "0.3 m"\ndiameter = "8 mm"', "material": '"brass"'},
    "`[[strike]]`": {"time": '"0.5 s"', "striker": '"cork"', "speed": "1"},
    "`[[mic]]`": {"place": "[0, 1, 0]"},
}


def scene_without(heading, key):
    lines = []
    for title, needed in REQUIRED.items():
        lines.append(re.search(r"\[+\w+\]+", title).group())
        lines += [f"{name} = {value}" for name, value in needed.items() if (title, name) != (heading, key)]
    return "\n".join(lines)


def test_what_is_called_required_is_required_and_nothing_else():
    assert parse_scene(scene_without("", ""), where="pan.toml").title == "pan"
    for heading in TABLES:
        called = {key for row in rows(heading) if row[-1] == "required" for key in spans(row[0])}
        assert called == set(REQUIRED.get(heading, {}))
        for key in called:
            with pytest.raises(SceneError, match=f"{key} is missing"):
                parse_scene(scene_without(heading, key), where="pan.toml")


def test_the_files_of_a_take_are_described():
    named = {word for row in rows("The take") for word in re.findall(r"NAME(\.[\w.]+)", row[0])}
    assert named == set(ENDINGS.values())
    (files,) = [row[1] for row in rows("`title` and `[take]`") if "files" in row[0]]
    assert spans(files) >= set(ENDINGS)


def test_the_columns_of_the_tables_are_described(shell, small):
    assert shell.run("take", small.name).code == 0
    described = spans(PROSE)
    for ending in (".curves.csv", ".events.csv"):
        heads = (shell.folder / "Galley spoon" / f"Galley spoon{ending}").read_text(encoding="utf-8").splitlines()[0]
        for head in heads.split(","):
            column = re.sub(r"mode_\d+", "mode_K", head.removeprefix("spoon."))
            if column in ("qy", "qz"):  # between qx and qw
                continue
            assert column in described, f"{ending}: {head}"


def snippet(language):
    (text,) = [body for name, body in FENCED.findall(README) if name == language]
    return text


def test_the_scene_that_is_shown_runs(shell):
    (shell.folder / "quay.toml").write_text(snippet("toml"), encoding="utf-8")
    assert shell.run("take", "quay.toml").code == 0
    assert shell.run("check", tomllib.loads(snippet("toml"))["title"]).code == 0


def test_the_python_that_is_shown_runs(shell):
    shutil.copytree(ROOT / "examples", shell.folder / "examples")
    done = subprocess.run(
        [sys.executable, "-c", snippet("python")],
        capture_output=True, check=False, text=True, cwd=shell.folder, env=shell.environment,
    )  # fmt: skip
    assert done.returncode == 0, done.stderr
    assert done.stdout.splitlines()[-1] == "True"
    assert (shell.folder / "takes" / "Signal loft" / "Signal loft.wav").exists()


def shape_of(value):
    """Keys and kinds of a JSON value, without its numbers; one element stands for a list."""
    if isinstance(value, dict):
        return {key: shape_of(item) for key, item in value.items()}
    return [shape_of(value[0])] if isinstance(value, list) else type(value)


def test_the_json_that_is_shown_is_what_comes(shell, small):
    told = json.loads(shell.run("modes", small.name, "--json").out)
    assert shape_of(json.loads(snippet("json"))) == shape_of(told)


def commands_between(name):
    (block,) = re.findall(rf"^<!-- {name} -->\n(.*?)^<!-- end -->$", README, re.MULTILINE | re.DOTALL)
    return [line.strip() for line in block.splitlines() if line.strip()]


def test_the_two_commands_are_two_and_are_what_is_run_for_every_change():
    (install,), (tests,) = commands_between("install"), commands_between("test")
    assert "--require-hashes -r requirements.lock" in install
    assert tests.endswith("-m pytest")
    (example,) = re.findall(r"resonate take (\S+)", install)
    assert (ROOT / example).exists()
    script = (ROOT / ".ci" / "run").read_text(encoding="utf-8")
    for name in ("install", "test"):
        assert f"/^<!-- {name} -->$/,/^<!-- end -->$/p' README.md" in script
    # They are read from the README, never written down a second time.
    assert 'bash -euo pipefail -c "$install"' in script
    assert 'bash -euo pipefail -c "$tests"' in script
    assert "pytest" not in script
    assert "requirements.lock" not in script


@pytest.mark.skipif(shutil.which("sed") is None, reason="no sed here")
@pytest.mark.parametrize("name", ["install", "test"])
def test_the_script_reads_the_readme_as_people_do(name):
    script = (ROOT / ".ci" / "run").read_text(encoding="utf-8")
    (extract,) = re.findall(rf"\$\((sed -n '/\^<!-- {name} -->.*)\)$", script, re.MULTILINE)
    found = subprocess.run(["sh", "-c", extract], capture_output=True, check=True, text=True, cwd=ROOT).stdout
    assert found.splitlines() == commands_between(name)


def test_paths_that_are_named_exist():
    named = set(re.findall(r"`((?:examples|tests|presets)/[\w./-]*|LICENSE|\w+\.md)`", PROSE))
    assert len(named) >= 3
    assert [name for name in named if not (ROOT / name).exists()] == []
