"""One physical simulation, turned into sound and motion that stay in step.

The names below are loaded when they are first used, so that importing the package is quick.
``run`` and ``take`` are rooms of the package as well as what is done in them; both can be called.
"""

from __future__ import annotations

import sys
from importlib import import_module
from types import ModuleType
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from resonate.body.body import Body as Body
    from resonate.body.build import build_body as build_body
    from resonate.modes.modeset import ModeSet as ModeSet
    from resonate.modes.solve import solve_modes as solve_modes
    from resonate.run.engine import run as run
    from resonate.run.record import Record as Record
    from resonate.scene.model import Scene as Scene
    from resonate.scene.read import read_scene as load
    from resonate.take.check import check_take as check
    from resonate.take.make import make_take as take

__version__ = "0.1.0"

_HOMES = {
    "Body": ("resonate.body.body", "Body"),
    "ModeSet": ("resonate.modes.modeset", "ModeSet"),
    "Record": ("resonate.run.record", "Record"),
    "Scene": ("resonate.scene.model", "Scene"),
    "build_body": ("resonate.body.build", "build_body"),
    "check": ("resonate.take.check", "check_take"),
    "load": ("resonate.scene.read", "read_scene"),
    "run": ("resonate.run.engine", "run"),
    "solve_modes": ("resonate.modes.solve", "solve_modes"),
    "take": ("resonate.take.make", "make_take"),
}

__all__ = [
    "Body",
    "ModeSet",
    "Record",
    "Scene",
    "build_body",
    "check",
    "load",
    "run",
    "solve_modes",
    "take",
]


class _Room(ModuleType):
    """A room that is called like what is done in it."""

    def __call__(self, *positional: Any, **named: Any) -> Any:  # noqa: ANN401 (whatever the function takes)
        home, inside = _HOMES[self.__name__.rpartition(".")[2]]
        return getattr(import_module(home), inside)(*positional, **named)


class _Front(ModuleType):
    """The package itself. Importing a room binds it here by its name, whoever imports it first."""

    def __setattr__(self, name: str, value: object) -> None:
        if name in _HOMES and isinstance(value, ModuleType):
            value.__class__ = _Room
        super().__setattr__(name, value)


sys.modules[__name__].__class__ = _Front


def __getattr__(name: str) -> Any:  # noqa: ANN401 (any of the public names)
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    home, inside = _HOMES[name]
    found = getattr(import_module(home), inside)
    return globals().get(name, found)


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
