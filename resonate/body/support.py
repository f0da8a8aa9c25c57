"""What holds a body: constraints, springs, dashpots and cords, the same for every family of shapes."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Protocol

import numpy as np
from scipy.sparse import csr_matrix, diags, vstack

from resonate.body.energy import eliminate
from resonate.body.hang import hang, topples
from resonate.errors import BodyError
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
    points or boxes they belong to, each with a cord of its own. ``strip_m``: springs are strips of this width along z
    centred at the points.
    """

    points_m: Array
    share: Array
    outward: Array | None = None
    places: int = 1
    strip_m: float = 0.0

    def spread(self) -> tuple[Array, Array]:
        """Points and shares of springs: two for a strip, which resist bounce and roll as the whole of it does."""
        if self.strip_m == 0.0:
            return self.points_m, self.share
        # A strip of width w with stiffness k in all turns by k w^2/12: so do halves at w/sqrt(12) to either side.
        aside = np.array([0.0, 0.0, self.strip_m / np.sqrt(12.0)])
        return np.concatenate((self.points_m - aside, self.points_m + aside)), 0.5 * np.tile(self.share, 2)

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
    ``damper_ns_m`` (k,); ``warnings``: what a person should know.
    """

    basis: csr_matrix
    springs: csr_matrix | None
    cords: csr_matrix | None
    damper_rows: csr_matrix
    damper_ns_m: Array
    warnings: tuple[str, ...] = ()


class Holdable(Protocol):
    """What a family of shapes must offer so that it can be held."""

    @property
    def name(self) -> str:
        """The name given in the scene."""

    @property
    def freedoms(self) -> int:
        """Number of generalized coordinates before supports, d."""

    def select(self, hold: HoldSpec) -> Held:
        """Find the material points of one support."""

    def motion(self, points_m: Array) -> csr_matrix:
        """Three displacements and three rotations (6 k, d) of material points (k, 3)."""

    def turn(self, point_m: Array) -> csr_matrix:
        """Rotation (3, d) of the matter nearest to a point (3,)."""

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


def _rolling_rows(held: Held, motion: csr_matrix) -> list[csr_matrix]:
    """Displacement along the normal of each point: a face of a solid that slides on a wall."""
    assert held.outward is not None  # noqa: S101 (solids give their normals)
    moves = [motion[np.arange(len(held.points_m)) * 6 + axis] for axis in range(3)]
    total = sum(diags(held.outward[:, axis]) @ moves[axis] for axis in range(1, 3))
    return [diags(held.outward[:, 0]) @ moves[0] + total]


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


def _cords(
    body: Holdable, hung: list[tuple[CordHold, Held]], *, up: Array, weight_n: float, centre_m: Array, alone: bool
) -> tuple[csr_matrix | None, tuple[str, ...]]:
    """Stiffness of all cords, and that of gravity on what hangs from them ``alone``."""
    if not hung:
        return None, ()
    points = np.concatenate([held.points_m for _, held in hung])
    number = np.concatenate([held.places * held.share for _, held in hung])
    length = np.concatenate([np.full(len(held.share), kind.length_m) for kind, held in hung])
    stretch = np.concatenate(
        [np.full(len(held.share), kind.stiffness_n_m or _TWINE_N / kind.length_m) for kind, held in hung]
    )
    arms = points - centre_m
    hanging = hang(arms, number / number.sum(), up=up, weight_n=weight_n)
    # Where something else holds the body as well, statics says nothing of the cords' part: they share evenly.
    tension = hanging.tension_n if alone else weight_n * number / number.sum()
    along = np.outer(up, up)
    sway = tension / length
    local = sway[:, None, None] * (np.eye(3) - along) + (number * stretch)[:, None, None] * along
    motion = body.motion(points)
    total = csr_matrix((body.freedoms, body.freedoms))
    for point, stiffness in enumerate(local):
        rows = motion[point * 6 + np.arange(3)]
        total = total + rows.T @ csr_matrix(stiffness) @ rows
    if not alone or weight_n == 0.0:
        return total.tocsr(), ()
    if topples(arms, hanging, local):
        raise BodyError(
            what="the body hangs from points below its mass centre and would fall over",
            where=f"body {body.name!r}",
            fix=f"fix the cords higher: the mass centre is at {np.round(centre_m, 6).tolist()} m in its own frame",
        )
    turn = body.turn(centre_m)
    total = total + turn.T @ csr_matrix(hanging.turning) @ turn
    if hanging.level:
        return total.tocsr(), ()
    return total.tocsr(), (
        f"body {body.name!r}: the cords are not above the mass centre, so that it would not hang still as it is "
        "placed; it is taken as if it did, every cord with the same share of the weight",
    )


def supports(
    body: Holdable,
    holds: tuple[HoldSpec, ...],
    *,
    up: Array,
    weight_n: float,
    centre_m: Array,
    line: bool,
    solid: bool = False,
    tied: csr_matrix | None = None,
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
    centre_m : Array
        (3,) mass centre.
    line : bool
        Whether the shape is a line (its guided ends keep two transverse motions).
    solid : bool
        Whether it is a solid: a face that is guided or sliding keeps its motion along itself, and a pinned one is
        held as firmly as a clamped one.
    tied : csr_matrix or None
        (c, d) conditions ``tied @ u = 0`` of the shape itself.
    """
    size = body.freedoms
    unused = body.unused()
    fixed = [csr_matrix((np.ones(len(unused)), (np.arange(len(unused)), unused)), shape=(len(unused), size))]
    if tied is not None:
        fixed.append(tied)
    springs, dampers, damping = [], [], []
    hung: list[tuple[CordHold, Held]] = []
    places = [(hold, body.select(hold)) for hold in holds]
    for hold, held in places:
        kind = hold.hold
        if solid and isinstance(kind, NamedHold):
            motion = body.motion(held.points_m)
            moves = (np.arange(len(held.points_m))[:, None] * 6 + np.arange(3)).ravel()
            rolls = kind.kind in ("guided", "sliding")
            fixed.extend(_rolling_rows(held, motion) if rolls else [motion[moves]])
        elif isinstance(kind, NamedHold | FixHold):
            fixed.extend(_fixed_rows(kind, held, body.motion(held.points_m), line=line))
        elif isinstance(kind, SpringHold):
            points, shares = held.spread()
            rows = body.motion(points)[(np.arange(len(points))[:, None] * 6 + np.arange(3)).ravel()]
            share = np.repeat(shares, 3)
            springs.append(rows.T @ diags(kind.stiffness_n_m * share) @ rows)
            if kind.damping_ns_m > 0.0:
                dampers.append(rows)
                damping.append(kind.damping_ns_m * share)
        else:
            hung.append((kind, held))
    alone = len(hung) == len(holds)
    cords, warnings = _cords(body, hung, up=up, weight_n=weight_n, centre_m=centre_m, alone=alone)
    damper_rows, damper_ns_m = _moving(dampers, damping, size)
    return Supports(
        basis=eliminate(_gather(fixed, size), size),
        springs=sum(springs[1:], springs[0]).tocsr() if springs else None,
        cords=cords,
        damper_rows=damper_rows,
        damper_ns_m=damper_ns_m,
        warnings=warnings,
    )
