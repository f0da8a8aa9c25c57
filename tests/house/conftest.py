"""The command line as a person uses it: a process of its own, in a folder of its own."""

from __future__ import annotations

import os
import subprocess
import sys
from dataclasses import dataclass
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]

# A bar that is struck once: solved and run in a moment.
SMALL = """\
title = "Galley spoon"

[take]
length = "0.4 s"

[picture]
rate = 25

[[body]]
name = "spoon"
shape = "bar"
length = "200 mm"
width = "20 mm"
height = "4 mm"
material = "steel"
floating = true
modes = {heard = "6 kHz", solved = "12 kHz", most = 20}

[[strike]]
body = "spoon"
time = "0.1 s"
spot = {fraction = [0.3, 0.5]}
striker = "wooden knob"
speed = "0.6 m/s"
"""


@dataclass(frozen=True)
class Outcome:
    """What a command left: exit code, both streams."""

    code: int
    out: str
    err: str


class Shell:
    """Runs ``python -m resonate`` in a folder, with a store of modes that all tests share."""

    def __init__(self, folder, cache):
        self.folder = folder
        self.environment = os.environ | {
            "PYTHONPATH": str(ROOT),
            "RESONATE_CACHE": str(cache),
            "OMP_NUM_THREADS": "1",
            "OPENBLAS_NUM_THREADS": "1",
            "PYTHONIOENCODING": "utf-8",
            "COLUMNS": "120",
        }

    def command(self, *arguments, before=""):
        """The process's command; ``before`` is Python that runs first in it, to stand in for a broken machine."""
        if not before:
            return [sys.executable, "-m", "resonate", *map(str, arguments)]
        return [sys.executable, "-c", f"{before}\nfrom resonate.cli import main\nmain()", *map(str, arguments)]

    def run(self, *arguments, before="", timeout=300, **more):
        """Run one command to its end."""
        environment = self.environment | more.pop("environment", {})
        done = subprocess.run(
            self.command(*arguments, before=before),
            capture_output=True,
            check=False,
            cwd=self.folder,
            env=environment,
            timeout=timeout,
            **more,
        )
        return Outcome(done.returncode, done.stdout.decode("utf-8"), done.stderr.decode("utf-8"))

    def start(self, *arguments, **more):
        """Start a command and go on."""
        return subprocess.Popen(
            self.command(*arguments, **more),
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            cwd=self.folder,
            env=self.environment,
        )


@pytest.fixture(scope="session")
def cache(tmp_path_factory):
    return tmp_path_factory.mktemp("modes")


@pytest.fixture
def shell(tmp_path, cache):
    return Shell(tmp_path, cache)


@pytest.fixture
def small(tmp_path):
    file = tmp_path / "spoon.toml"
    file.write_text(SMALL, encoding="utf-8")
    return file


@pytest.fixture(scope="session")
def root():
    return ROOT


# Faults that were refused: (fault, where, what, fix), for the table at the end.
FAULTY = pytest.StashKey[list]()


def pytest_configure(config):
    config.faulty = FAULTY


def pytest_terminal_summary(terminalreporter, config):
    rows = config.stash.get(FAULTY, [])
    if rows:
        terminalreporter.section(f"{len(rows)} kinds of bad input, each refused with exit code 2")
    for number, (fault, where, what, fix) in enumerate(rows, 1):
        terminalreporter.write_line(f"{number:2}  {fault:30}  {where}: {what}  ->  {fix}"[:230])
