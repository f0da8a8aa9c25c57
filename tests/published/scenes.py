"""Small scenes written as a person would write them, and the modes that come out, sorted by kind."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np

from resonate.body.build import build_body
from resonate.modes.solve import solve_modes
from resonate.scene.read import parse_scene

# Fields of a line and of a plate by the kind of motion they make.
LINE = {"up": 1, "across": 2, "along": 0, "twist": 3}
PLATE = {"bending": (1,), "plane": (0, 2)}


@dataclass(frozen=True)
class Solved:
    """Frequencies of one body and which field carries most kinetic energy in each mode."""

    hz: np.ndarray
    field: np.ndarray
    rigid: int


@cache
def solve(body: str) -> Solved:
    """Solve the one body of a scene text at its default mesh."""
    scene = parse_scene(f'title = "check"\n[take]\nlength = "1 s"\n[[body]]\nname = "sample"\n{body}')
    thing = build_body(scene.bodies[0], temperature_k=293.15, gravity_m_s2=9.80665)
    modes = solve_modes(thing)
    nodes = len(thing.grid.nodes_m)
    fields = thing.freedoms // nodes
    mass = thing.forms().mass
    free = thing.forms().basis.T @ modes.shape
    diagonal = thing.forms().basis @ (mass @ free)
    energy = (modes.shape * diagonal).reshape(nodes, fields, -1).sum(axis=0)
    return Solved(modes.frequency_hz, np.argmax(energy, axis=0), modes.rigid.shape[1])


def of_kind(solved: Solved, *fields: int) -> np.ndarray:
    """Frequencies of the modes that move mostly in these fields."""
    return solved.hz[np.isin(solved.field, fields)]


def distinct(hz: np.ndarray, *, apart: float = 2e-4) -> np.ndarray:
    """Frequencies with each equal pair counted once."""
    keep = np.concatenate(([True], np.diff(hz) > apart * hz[1:]))
    return hz[keep]


def worst(found: np.ndarray, expected: list[float]) -> float:
    """Largest relative difference between the first modes and the expected ones, in order."""
    wanted = np.sort(np.array(expected))
    return float(np.max(np.abs(found[: len(wanted)] / wanted - 1.0)))
