"""What is installed: the public names, the files that travel, the locked dependencies."""

from __future__ import annotations

import ast
import itertools
import re
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest
from packaging.markers import Marker
from packaging.requirements import Requirement
from packaging.utils import canonicalize_name

import resonate
from resonate.scene.presets import data_dir
from resonate.scene.starter import examples

ROOT = Path(__file__).resolve().parents[2]
PROJECT = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))
LOCK = (ROOT / "requirements.lock").read_text(encoding="utf-8")

PUBLIC = [
    "Body", "ModeSet", "Record", "Scene", "build_body", "check", "load", "run", "solve_modes", "take",
]  # fmt: skip


def test_the_public_names_are_these():
    assert resonate.__all__ == PUBLIC
    assert sorted(PUBLIC) == PUBLIC
    assert set(PUBLIC) <= set(dir(resonate))
    for name in PUBLIC:
        assert callable(getattr(resonate, name)), name
    with pytest.raises(AttributeError, match="no attribute 'lod'"):
        resonate.lod  # noqa: B018


# Two public names are rooms as well: whoever loads a room first must not take the name away.
ORDERS = [
    "import resonate.run.engine, resonate.take.make",
    "from resonate.take.make import make_take; from resonate.run.engine import run",
    "resonate.run; resonate.take; resonate.run; resonate.take",
    "from resonate import take, run",
    "import resonate.take.check as check",
]


@pytest.mark.parametrize("first", ORDERS)
def test_rooms_that_are_verbs_can_be_called_whatever_was_loaded_first(first):
    code = f"""
import resonate
{first}
from resonate.errors import ResonateError
for verb in (resonate.run, resonate.take):
    try:
        verb()
    except TypeError as error:
        print(error)
import resonate.run.record as record, resonate.take.make as make
print(record.__name__, make.__name__, resonate.run.record is record)
"""
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, check=False, text=True, cwd=ROOT)
    assert done.returncode == 0, done.stderr
    ran, took, modules = done.stdout.splitlines()
    assert ran.startswith("run() missing")
    assert took.startswith("make_take() missing")
    assert modules == "resonate.run.record resonate.take.make True"


def test_presets_and_examples_can_be_reached():
    assert {entry.name for entry in data_dir("presets").iterdir()} >= {"materials.toml", "strikers.toml"}
    written = {path.stem for path in (ROOT / "examples").glob("*.toml")}
    assert len(written) >= 3
    assert set(examples()) == written
    force = PROJECT["tool"]["hatch"]["build"]["targets"]["wheel"]["force-include"]
    assert force == {"presets": "resonate/presets", "examples": "resonate/examples"}
    assert {"presets", "examples", "tests", "requirements.lock"} <= set(
        PROJECT["tool"]["hatch"]["build"]["targets"]["sdist"]["include"]
    )


def entries():
    """Each requirement of the lock with its hashes."""
    blocks = re.findall(r"^(\S[^\n]*?) \\\n((?:    --hash=[^\n]*\n)+)", LOCK, re.MULTILINE)
    return [(Requirement(line), re.findall(r"--hash=sha256:([0-9a-f]{64})", hashes)) for line, hashes in blocks]


def test_every_line_of_the_lock_is_a_pinned_requirement_with_hashes():
    found = entries()
    assert len(found) > 20
    assert all(hashes for _, hashes in found)
    for requirement, _ in found:
        (pin,) = requirement.specifier
        assert pin.operator == "=="
        assert requirement.url is None
    # Nothing in the file that is not such a line or a remark.
    kinds = {
        re.sub(r"^(    --hash=sha256:[0-9a-f]{64}( \\)?|[\w.\[\]-]+==[\w.+!]+( ; .*)? \\|\s*#.*)$", "known", line)
        for line in LOCK.splitlines()
    }
    assert kinds == {"known"}
    assert "://" not in LOCK
    assert len(re.findall(r"^\S+==", LOCK, re.MULTILINE)) == len(found)


PYTHONS = ["3.11.9", "3.12.4", "3.13.2", "3.14.0"]
SYSTEMS = [("linux", "Linux", "posix"), ("darwin", "Darwin", "posix"), ("win32", "Windows", "nt")]


def place(python, system):
    """What markers of requirements are asked about."""
    return {
        "python_version": python.rpartition(".")[0],
        "python_full_version": python,
        "sys_platform": system[0],
        "platform_system": system[1],
        "os_name": system[2],
        "implementation_name": "cpython",
        "platform_python_implementation": "CPython",
        "extra": "",
    }


def test_optional_parts_are_pinned_or_locked():
    (fast,) = PROJECT["project"]["optional-dependencies"]["fast"]
    assert re.fullmatch(r"rslab==[\d.]+", fast)
    assert set(PROJECT["project"]["optional-dependencies"]) == {"fast", "mesh", "build", "test"}
    building = PROJECT["project"]["optional-dependencies"]["build"]
    assert building == PROJECT["build-system"]["requires"]


@pytest.mark.parametrize(("python", "system"), list(itertools.product(PYTHONS, SYSTEMS)), ids=str)
def test_the_lock_holds_one_fitting_version_of_everything_asked_for(python, system):
    chosen = {}
    for requirement, _ in entries():
        if requirement.marker is None or Marker(str(requirement.marker)).evaluate(place(python, system)):
            name = canonicalize_name(requirement.name)
            assert name not in chosen, f"two versions of {name}"
            chosen[name] = next(iter(requirement.specifier)).version
    asked = [*PROJECT["project"]["dependencies"], *PROJECT["build-system"]["requires"]]
    for extra in ("mesh", "build", "test"):
        asked += PROJECT["project"]["optional-dependencies"][extra]
    for text in asked:
        requirement = Requirement(text)
        if requirement.marker is not None and not requirement.marker.evaluate(place(python, system)):
            continue
        name = canonicalize_name(requirement.name)
        assert name in chosen, f"{name} is not in the lock"
        assert requirement.specifier.contains(chosen[name]), f"{text} and {chosen[name]}"


def imported():
    """Top-level modules that the package imports."""
    for path in (ROOT / "resonate").rglob("*.py"):
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            if isinstance(node, ast.Import):
                yield from (alias.name.partition(".")[0] for alias in node.names)
            elif isinstance(node, ast.ImportFrom) and node.module and not node.level:
                yield node.module.partition(".")[0]


def test_what_the_package_imports_is_what_it_asks_for():
    modules = {"skfem": "scikit-fem", "netgen": "netgen-mesher"}
    used = {modules.get(name, name) for name in imported()} - sys.stdlib_module_names - {"resonate"}
    needed = {canonicalize_name(Requirement(text).name) for text in PROJECT["project"]["dependencies"]}
    extras = PROJECT["project"]["optional-dependencies"]
    optional = {canonicalize_name(Requirement(text).name) for text in (*extras["fast"], *extras["mesh"])}
    assert used - optional <= needed
    print("asked for but not imported:", sorted(needed - used))


def test_the_version_is_said_in_one_place():
    assert PROJECT["tool"]["hatch"]["version"]["path"] == "resonate/__init__.py"
    assert "version" in PROJECT["project"]["dynamic"]
    newest = re.search(r"^## (\S+)", (ROOT / "CHANGELOG.md").read_text(encoding="utf-8"), re.MULTILINE).group(1)
    assert newest == resonate.__version__
