"""The house rules that a machine can check: who imports whom, how long files are, what words they hold."""

from __future__ import annotations

import ast
import re
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
PACKAGE = ROOT / "resonate"

# Data flows one way: a room imports rooms to its left, itself, and the errors.
ROOMS = ["scene", "body", "modes", "field", "run", "sound", "motion", "infer", "take", "vary", "cli"]
FRONT = ("__init__.py", "__main__.py")
MOST_LINES = 400
HOMELESS = {"util", "utils", "misc", "helper", "helpers", "common", "base", "tools", "shared", "stuff", "general"}

SOURCES = sorted(PACKAGE.rglob("*.py"))
TESTS = sorted((ROOT / "tests").rglob("*.py"))
WRITTEN = [
    *SOURCES,
    *TESTS,
    *sorted(ROOT.glob("presets/*.toml")),
    *sorted(ROOT.glob("examples/*.toml")),
    *(ROOT / name for name in ("README.md", "CHANGELOG.md", "pyproject.toml", ".ci/run", "requirements.lock")),
]
OWN = Path(__file__)


def relative(path):
    return path.relative_to(ROOT).as_posix()


def imported(tree, *, package):
    """Dotted names of the package's own modules that a source asks for, wherever the import stands."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            above = package.split(".")[: len(package.split(".")) + 1 - node.level] if node.level else []
            home = ".".join([*above, *([node.module] if node.module else [])])
            # What is named after "import" may be a module as well.
            yield from (f"{home}.{alias.name}" for alias in node.names)
        elif isinstance(node, ast.Call):
            called = node.func.attr if isinstance(node.func, ast.Attribute) else getattr(node.func, "id", "")
            if called in ("import_module", "__import__", "find_spec") and node.args:
                given = node.args[0]
                yield given.value if isinstance(given, ast.Constant) else "resonate.unknown"


def trespasses(source, *, room, kernel_user=False, package="resonate.room"):
    """Imports that the contract does not allow in a room, as sentences."""
    allowed = {"errors", *ROOMS[: ROOMS.index(room) + 1]} if room in ROOMS else {"errors"}
    for name in imported(ast.parse(source), package=package):
        parts = name.split(".")
        if parts[0] != "resonate" or name == "resonate.__version__":
            continue
        target = parts[1] if len(parts) > 1 else "the package itself"
        if target not in allowed:
            yield f"{room} imports {name}"
        if "kernels" in parts and not kernel_user:
            yield f"{room} reaches into {name}; only run may"


def room_of(path):
    return path.relative_to(PACKAGE).parts[0].removesuffix(".py")


def test_every_folder_and_module_is_a_room():
    found = {room_of(path) for path in SOURCES if path.name not in FRONT or path.parent != PACKAGE}
    assert found <= {*ROOMS, "errors"}, f"not rooms of the house: {found - {*ROOMS, 'errors'}}"
    assert {"scene", "body", "modes", "field", "run", "sound", "motion", "take", "cli"} <= found


@pytest.mark.parametrize("path", SOURCES, ids=relative)
def test_a_room_imports_only_rooms_above_it(path):
    if path.parent == PACKAGE and path.name in FRONT:
        return
    room = room_of(path)
    package = ".".join(path.parent.relative_to(ROOT).parts)
    source = path.read_text(encoding="utf-8")
    assert list(trespasses(source, room=room, kernel_user=room == "run", package=package)) == []


def test_the_errors_import_nothing_of_the_house():
    tree = ast.parse((PACKAGE / "errors.py").read_text(encoding="utf-8"))
    assert [name for name in imported(tree, package="resonate") if name.startswith("resonate")] == []


def test_only_the_command_line_starts_the_command_line():
    tree = ast.parse((PACKAGE / "__main__.py").read_text(encoding="utf-8"))
    assert {name for name in imported(tree, package="resonate") if "resonate" in name} == {"resonate.cli.main"}


# Each way to break the contract, and the way it must be seen.
BROKEN = [
    ("from resonate.run.engine import run", "run.engine"),
    ("import resonate.sound.render", "sound.render"),
    ("from resonate import take", "resonate.take"),
    ("from resonate import load", "resonate.load"),
    ("def f():\n    from resonate.take.make import make_take", "take.make"),
    ("if TYPE_CHECKING:\n    from resonate.motion.curves import Curves", "motion.curves"),
    ("from ..run import engine", "resonate.run.engine"),
    ("from .. import cli", "resonate.cli"),
    ('import_module("resonate.take.make")', "take.make"),
    ("importlib.import_module(name)", "unknown"),
    ("from resonate.run.kernels import force", "only run may"),
    ("class A:\n    def f(self):\n        import resonate.vary as v", "vary"),
]


@pytest.mark.parametrize(("source", "seen"), BROKEN)
def test_a_breach_of_the_contract_is_seen(source, seen):
    assert any(seen in found for found in trespasses(source, room="body", package="resonate.body"))


def test_what_the_contract_allows_is_not_called_a_breach():
    source = (
        "from resonate import __version__\nfrom resonate.errors import BodyError\n"
        "from resonate.scene.model import Scene\nfrom . import outline\nimport numpy as np\nimport_module('scipy')"
    )
    assert list(trespasses(source, room="body", package="resonate.body")) == []
    kernels = "from resonate.run.kernels.force import solve"
    assert list(trespasses(kernels, room="run", kernel_user=True)) == []


@pytest.mark.parametrize("path", [*SOURCES, *TESTS], ids=relative)
def test_no_file_outgrows_the_ceiling(path):
    lines = len(path.read_text(encoding="utf-8").splitlines())
    assert lines <= MOST_LINES, f"{relative(path)} has {lines} lines; split it by concept"


def test_no_module_is_homeless():
    names = {relative(path): {*path.relative_to(ROOT).with_suffix("").parts} for path in [*SOURCES, *TESTS]}
    homeless = {name for name, parts in names.items() if parts & HOMELESS}
    assert homeless == set()


def test_nothing_but_the_house_lies_on_the_top_floor():
    kept = {"README.md", "CHANGELOG.md", "LICENSE", "pyproject.toml", "requirements.lock"}
    kept |= {"resonate", "presets", "examples", "tests"}
    # What building and environments leave behind is not part of the house.
    left = {"build", "dist", "venv", "takes", "node_modules"}
    found = {path.name for path in ROOT.iterdir() if not path.name.startswith(".")}
    strangers = {name for name in found - kept - left if not name.endswith(".egg-info")}
    assert {name for name in strangers if (ROOT / name).is_dir() or name.endswith(".py")} == set()
    assert kept <= found


# Spelt backwards, so that this file does not hold what it looks for.
WORDS = [
    word[::-1]
    for word in ["erutcel", "tpircsnart", "rotcurtsni", "rehcaet", "tnemngissa", "krowemoh", "rotut", "tnega", "tnatsissa", "tneduts", "tekcit", "tnirps", "odot", "emxif", "tpmorp", "tpgtahc", "edualc", "ledom_egaugnal", "revodnah", "reweiver"]
]
PLACES = [
    r"(?<![\w.])/(?:work|root|home|Users|mnt|media|opt|srv|tmp)/",  # somebody's own folders
    r"\b[A-Za-z]:\\\\?(?:Users|Documents|Work)",  # the same elsewhere
    r"\b[\w-]+\.(?:internal|lan|localdomain)\b",  # machines of a private network
]
ADDRESSES = [r"[a-z]+://", r"\bpypi\b", r"\bpythonhosted\b", r"\bnpmjs\b", r"--(?:extra-)?index-url", r"--find-links"]


def held(pattern, paths):
    """Lines that hold a pattern, as ``file:line``."""
    found = []
    for path in paths:
        for number, line in enumerate(path.read_text(encoding="utf-8").splitlines(), 1):
            if re.search(pattern, line, re.IGNORECASE):
                found.append(f"{relative(path)}:{number}: {line.strip()[:100]}")
    return found


@pytest.mark.parametrize("word", WORDS)
def test_files_speak_of_the_program_not_of_how_it_was_made(word):
    assert held(rf"\b{re.escape(word).replace('_', '.')}s?\b", WRITTEN) == []


def test_no_file_points_into_somebodys_machine():
    for pattern in PLACES:
        assert held(pattern, [path for path in WRITTEN if path != OWN]) == []


def test_no_file_holds_an_address():
    for pattern in ADDRESSES:
        assert held(pattern, [path for path in WRITTEN if path != OWN]) == []


def test_the_searches_find_what_they_look_for(tmp_path):
    assert len(set(WORDS)) == len(WORDS) >= 20
    samples = ['"/home/mate/scene.toml"', r'"C:\\Users\\mate"', "deckhand.internal"]
    for pattern, sample in zip(PLACES, samples, strict=True):
        assert re.search(pattern, sample, re.IGNORECASE)
    samples = ["see ftp://here", "from PyPI", "files.pythonhosted", "npmjs", "--index-url x", "--find-links y"]
    for pattern, sample in zip(ADDRESSES, samples, strict=True):
        assert re.search(pattern, sample, re.IGNORECASE)
    assert re.search(rf"\b{WORDS[0]}s?\b", f"the {WORDS[0]}s")
