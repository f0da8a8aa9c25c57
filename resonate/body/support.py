"""What holds a body: constraints, springs, dashpots and cords, the same for every family of shapes."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Protocol

import numpy as np
from scipy.sparse import csr_matrix, diags, vstack

from resonate.body.energy import eliminate
from resonate.scene.model import CordHold, FixHold, NamedHold, SpringHold

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.scene.model import HoldSpec

    Array = NDArray[np.float64]

AXES = ("x", "y", "z", "rx", "ry", "rz")
# Tension stiffness E A of a cord whose spring is not given: about 1 mm of nylon twine (from memory).
_TWINE_N = 1.5e3
# Interpolation weights below this are round-off of a point that sits on a node.
_ROUNDING = 1e-10


@dataclass(frozen=True, slots=True)
class Held:
    """Where one support acts.

    ``points_m`` (k, 3) material points; ``share`` (k,) how much of a spring each takes (sum 1);
    ``outward`` (k, 3) normals of the edge in its plane, or None off the edges; ``places``: how many ends, edges,
    points or boxes they belong to, each with a cord of its own.
    """

    points_m: Array
    share: Array
    outward: Array | None = None
    places: int = 1

    @classmethod
    def of(cls, points_m: Array, size: Array, *, outward: Array | None = None, places: int = 1) -> Held:
        """Share by the length or area (k,) that each point stands for; evenly where that is nothing."""
        total = float(size.sum())
        share = size / total if total > 0.0 else np.full(len(size), 1.0 / len(size))
        return cls(points_m, share, outward, places)


@dataclass(frozen=True, slots=True)
class Supports:
    """All supports of one body over its freedoms d.

    ``basis`` (d, f); ``springs`` and ``cords`` (d, d) stiffness or None; ``damper_rows`` (k, d) with
    ``damper_ns_m`` (k,).
    """

    basis: csr_matrix
    springs: csr_matrix | None
    cords: csr_matrix | None
    damper_rows: csr_matrix
    damper_ns_m: Array


class Holdable(Protocol):
    """What a family of shapes must offer so that it can be held."""

    @property
    def freedoms(self) -> int:
        """Number of generalized coordinates before supports, d."""

    def select(self, hold: HoldSpec) -> Held:
        """Find the material points of one support."""

    def motion(self, points_m: Array) -> csr_matrix:
        """Three displacements and three rotations (6 k, d) of material points (k, 3)."""

    def unused(self) -> NDArray[np.int64]:
        """Freedoms that this shape never moves."""


def _fixed_rows(kind: NamedHold | FixHold, held: Held, motion: csr_matrix, *, line: bool) -> list[csr_matrix]:
    axes: tuple[str, ...]
    if isinstance(kind, FixHold):
        axes = kind.axes
    else:
        axes = {
            "clamped": AXES,
            "pinned": AXES[:3],
            "guided": ("x", "rx", "ry", "rz") if line else ("x", "z", "rx", "ry", "rz"),
            "sliding": ("y",),
        }[kind.kind]
    count = len(held.points_m)
    rows = [motion[np.arange(count) * 6 + AXES.index(axis)] for axis in axes]
    if isinstance(kind, NamedHold) and kind.kind == "pinned" and held.outward is not None:
        # A hinge along an edge: the edge itself cannot turn about its normal (the hard simple support).
        turned = [diags(held.outward[:, axis]) @ motion[np.arange(count) * 6 + 3 + axis] for axis in range(3)]
        rows.append(turned[0] + turned[1] + turned[2])
    return rows


def _tidy(rows: list[csr_matrix], width: int) -> csr_matrix:
    if not rows:
        return csr_matrix((0, width))
    stack = vstack(rows).tocsr()
    stack.data[np.abs(stack.data) < _ROUNDING] = 0.0
    stack.eliminate_zeros()
    return stack


def _gather(rows: list[csr_matrix], width: int) -> csr_matrix:
    stack = _tidy(rows, width)
    return stack[np.diff(stack.indptr) > 0]


def _moving(rows: list[csr_matrix], damping: list[Array], width: int) -> tuple[csr_matrix, Array]:
    # A skin has no motion along its own plane, so that some rows of a dashpot are empty.
    stack = _tidy(rows, width)
    moves = np.diff(stack.indptr) > 0
    return stack[moves], np.concatenate([*damping, np.zeros(0)])[moves]


def supports(
    body: Holdable, holds: tuple[HoldSpec, ...], *, up: Array, weight_n: float, line: bool
) -> Supports:
    """Turn the supports of a scene into sparse forms.

    Parameters
    ----------
    body, holds : Holdable, tuple[HoldSpec, ...]
        The shape and its supports.
    up : Array
        (3,) unit vector against gravity, in the body frame; cords pull along it.
    weight_n : float
        Weight shared by the cords, N.
    line : bool
        Whether the shape is a line (its guided ends keep two transverse motions).
    """
    size = body.freedoms
    unused = body.unused()
    fixed = [csr_matrix((np.ones(len(unused)), (np.arange(len(unused)), unused)), shape=(len(unused), size))]
    springs, cords, dampers, damping = [], [], [], []
    places = [(hold, body.select(hold)) for hold in holds]
    hung = sum(held.places for hold, held in places if isinstance(hold.hold, CordHold))
    for hold, held in places:
        motion = body.motion(held.points_m)
        count = len(held.points_m)
        moves = np.arange(count)[:, None] * 6 + np.arange(3)
        kind = hold.hold
        if isinstance(kind, NamedHold | FixHold):
            fixed.extend(_fixed_rows(kind, held, motion, line=line))
        elif isinstance(kind, SpringHold):
            rows = motion[moves.ravel()]
            share = np.repeat(held.share, 3)
            springs.append(rows.T @ diags(kind.stiffness_n_m * share) @ rows)
            if kind.damping_ns_m > 0.0:
                dampers.append(rows)
                damping.append(kind.damping_ns_m * share)
        else:
            stretch = kind.stiffness_n_m if kind.stiffness_n_m is not None else _TWINE_N / kind.length_m
            sway = weight_n / hung / kind.length_m
            for point in range(count):
                rows = motion[moves[point]]
                local = sway * np.eye(3) + (stretch - sway) * np.outer(up, up)
                cords.append(held.places * held.share[point] * (rows.T @ csr_matrix(local) @ rows))
    damper_rows, damper_ns_m = _moving(dampers, damping, size)
    return Supports(
        basis=eliminate(_gather(fixed, size), size),
        springs=sum(springs[1:], springs[0]).tocsr() if springs else None,
        cords=sum(cords[1:], cords[0]).tocsr() if cords else None,
        damper_rows=damper_rows,
        damper_ns_m=damper_ns_m,
    )
