"""Where the elements of a vessel lie, and how many harmonics round its axis it needs."""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from resonate.body.flat_layout import SHEAR, plane_stress
from resonate.body.meridian import Course, Piece, course, meridian
from resonate.body.spectral import lobatto
from resonate.body.vessel_spot import foot_of, share_of
from resonate.body.waves import bending_wavenumber, top_frequency
from resonate.scene.model import BoxPlace, NamedPlace, PointPlace, VesselShape

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.scene.model import BodySpec, MaterialSpec

    Array = NDArray[np.float64]
    IntArray = NDArray[np.int64]

ORDER = 8
# Fields of each node and harmonic: motion outward, along y and round; turns towards the meridian and round.
FIELDS = 5
# Nodes for each wavelength of the highest wanted mode.
_NODES_PER_WAVE = 5.0
# An element is at most this many lengths sqrt(radius * wall) of the bending boundary layer.
_LAYERS = 6.0
# Least cosine of the angle of a kink that passes the twisting moment on; at a corner it has nowhere to go.
KINK = 0.7
# Length of the element at a free edge, in walls.
_EDGE = 2.5
_LEAST = 4e-3
# A curved element turns by half a right angle at the most, rad.
_BEND = 0.25 * np.pi
_MOST_ELEMENTS = 96
_MOST_HARMONICS = 96
# Largest number of freedoms, all harmonics together.
_BUDGET = 130_000
_MARGIN = 1.15
_STRAIGHT = 1e-6
_LOOKS = 64


@dataclass(frozen=True)
class VesselLayout:
    """A vessel ready to be assembled.

    ``nodes`` looks at the meridian at every node of every element, (e * k) in order; ``number`` (e, k, 5) are the
    freedoms of one harmonic, ``freedoms`` of them; ``arc_m`` (e, k) is the way along the meridian;
    ``harmonics``: the highest number N of waves round the axis. ``closed``: whether each end lies on the axis.
    """

    pieces: tuple[Piece, ...]
    spans: tuple[tuple[int, float, float], ...]
    nodes: Course
    arc_m: Array
    number: IntArray
    freedoms: int
    harmonics: int
    closed: tuple[bool, bool]
    rigidity: Array
    warnings: tuple[str, ...]

    @property
    def elements(self) -> int:
        """Number of elements along the meridian."""
        return len(self.spans)

    def stem(self, *, first: bool) -> Array:
        """Radius and height of the first node at least half a wall off the axis, at one end."""
        order = slice(None) if first else slice(None, None, -1)
        place, wall = self.nodes.place_m[order], self.nodes.wall_m[order]
        return np.asarray(place[int(np.argmax(place[:, 0] >= (0.5 - 1e-6) * wall))])

    def per_node(self, values: Array) -> Array:
        """Shape (e * k, ...) as (e, k, ...)."""
        return values.reshape(self.elements, ORDER + 1, *values.shape[1:])


def _stations(pieces: tuple[Piece, ...], count: int = 48) -> tuple[Course, Array]:
    """Midpoints along the meridian and the length (k,) each stands for."""
    seen, steps = [], []
    for piece in pieces:
        p = (np.arange(count) + 0.5) / count * piece.end
        seen.append(course(piece, p))
        steps.append(np.linalg.norm(piece.curve(p, 1), axis=1) * piece.end / count)
    joined = Course(*(np.concatenate([getattr(at, key) for at in seen]) for key in Course.__dataclass_fields__))
    return joined, np.concatenate(steps)


def _waves(material: MaterialSpec, rigidity: Array, wall: Array, hertz: float) -> Array:
    """Wavenumber (k,) of bending waves in a flat wall."""
    stiff = float(np.sqrt(rigidity[0, 0] * rigidity[1, 1]))
    density = material.density_kg_m3
    return bending_wavenumber(
        2.0 * np.pi * hertz,
        stiffness=stiff * wall**3 / 12.0,
        inertia=density * wall,
        turning=density * wall**3 / 12.0,
        shear=SHEAR * min(material.shear_pa[1:]) * wall,
    )


def _expected(material: MaterialSpec, rigidity: Array, at: Course, step: Array, hertz: float) -> float:
    """Estimate the number of modes below a frequency.

    Curvature stiffens: waves in the direction phi from the meridian need omega^2 above
    E/rho (k_round cos^2 phi + k_meridian sin^2 phi)^2. Bolotin, PMM 24 (1960) 831; Wilkinson, JASA 43 (1968) 168.
    """
    omega2 = (2.0 * np.pi * hertz) ** 2
    phi = (np.arange(24) + 0.5) / 24 * 0.5 * np.pi
    bend, turn = at.curvature_1_m[:, :1], at.curvature_1_m[:, 1:]
    young = min(material.young_pa[:2])
    least = young / material.density_kg_m3 * (turn * np.cos(phi) ** 2 + bend * np.sin(phi) ** 2) ** 2
    share = np.sqrt(np.maximum(1.0 - least / omega2, 0.0)).mean(axis=1)
    area = 2.0 * np.pi * at.place_m[:, 0] * step
    bending = float(area @ (share * _waves(material, rigidity, at.wall_m, hertz) ** 2)) / (4.0 * np.pi)
    stretch = omega2 * material.density_kg_m3 * (1.0 / rigidity[0, 0] + 1.0 / rigidity[2, 2])
    return float(bending + float(area.sum()) * stretch / (4.0 * np.pi))


def harmonics_for(spec: BodySpec, rigidity: Array, at: Course, hertz: float) -> int:
    """Highest number of waves round the axis that reaches down to a frequency."""
    return int(np.ceil(float(np.max(at.place_m[:, 0] * _waves(spec.material, rigidity, at.wall_m, hertz))))) + 1


def lay_vessel(spec: BodySpec) -> VesselLayout:
    """Choose elements and harmonics from the highest wanted frequency, within a budget.

    Raises
    ------
    BodyError
        If the profile cannot be a shell.
    """
    shape = spec.shape
    assert isinstance(shape, VesselShape)  # noqa: S101 (the caller sorts the kinds)
    pieces = meridian(shape, spec.name)
    rigidity = plane_stress(spec.material)
    at, step = _stations(pieces)
    ends = [course(pieces[0], np.zeros(1)), course(pieces[-1], np.array([pieces[-1].end]))]

    def expected(hertz: float) -> float:
        # Below the frequency at which it would breathe, an open vessel rings round its edges: a pair for each n.
        waves = [end.place_m[0, 0] * _waves(spec.material, rigidity, end.wall_m, hertz)[0] for end in ends]
        return max(_expected(spec.material, rigidity, at, step, hertz), 2.0 * float(sum(waves)))

    top = top_frequency(
        expected,
        wanted=int(_MARGIN * spec.modes.most) + 8,
        highest_hz=spec.modes.solved_or_default_hz,
    )
    harmonics = max(3, harmonics_for(spec, rigidity, at, top))
    spans, asked = _spans(spec, shape, pieces, rigidity, top)
    per_harmonic = 2 * FIELDS * ORDER * len(spans)
    allowed = max(3, min(_MOST_HARMONICS, int(_BUDGET / per_harmonic) - 1))
    warnings: tuple[str, ...] = ()
    if harmonics > allowed or asked > len(spans):
        reach = top * min(1.0, allowed / harmonics, len(spans) / asked) ** 2
        warnings = (
            f"body {spec.name!r}: {min(allowed, harmonics)} waves round the axis and "
            f"{len(spans)} elements along the wall instead of the {harmonics} and {asked} "
            f"that {top:.0f} Hz asks for; modes are resolved up to about {reach:.0f} Hz",
        )
        harmonics = min(allowed, harmonics)
    return _number(pieces, spans, harmonics, rigidity, warnings)


def _marks(spec: BodySpec, shape: VesselShape, pieces: tuple[Piece, ...]) -> list[tuple[int, float]]:
    """Places (piece, parameter) that must fall on a node: point supports, stems, ends of boxes, lugs."""
    marks = [share_of(pieces, lug.at[0]) for lug in shape.lugs]
    ends = [(0, 0.0, 1.0), (len(pieces) - 1, pieces[-1].end, -1.0)]
    for hold in spec.support:
        if isinstance(hold.where, NamedPlace):
            for number, end, way in ends:
                at = course(pieces[number], np.array([end]))
                if at.place_m[0, 0] == 0.0:
                    marks.append((number, end + way * 0.5 * float(at.wall_m[0])))
        elif isinstance(hold.where, PointPlace):
            x, y, z = hold.where.point_m
            marks.append(foot_of(pieces, np.array([np.hypot(x, z), y])))
        elif isinstance(hold.where, BoxPlace):
            for number, piece in enumerate(pieces):
                p = np.linspace(0.0, piece.end, 257)
                height = piece.curve(p, 0)[:, 1]
                for level in (hold.where.low_m[1], hold.where.high_m[1]):
                    crossing = np.flatnonzero((height[1:] - level) * (height[:-1] - level) < 0.0)
                    part = (level - height[crossing]) / (height[crossing + 1] - height[crossing])
                    marks.extend((number, float(q)) for q in p[crossing] + part * (p[1] - p[0]))
    return marks


def _spans(
    spec: BodySpec, shape: VesselShape, pieces: tuple[Piece, ...], rigidity: Array, top: float
) -> tuple[tuple[tuple[int, float, float], ...], int]:
    """Elements (piece, begin, end), and how many the waves ask for."""
    spans: list[tuple[int, float, float]] = []
    marks = _marks(spec, shape, pieces)
    bent = _bent(pieces)
    for number, piece in enumerate(pieces):
        inside = [p for which, p in marks if which == number] + _edges(piece, bent[number : number + 2])
        breaks = np.unique(np.clip(np.array([0.0, piece.end, *inside]), 0.0, piece.end))
        breaks = breaks[np.concatenate(([True], np.diff(breaks) > 1e-6 * piece.end))]
        breaks[-1] = piece.end
        for low, high in pairwise(breaks):
            ends = _ends(spec, piece, rigidity, top, (low, high))
            spans.extend((number, float(a), float(b)) for a, b in pairwise(ends))
    return tuple(_thinned(spans, _MOST_ELEMENTS)), len(spans)


def _bent(pieces: tuple[Piece, ...]) -> list[bool]:
    """Whether each end of the pieces, from first to last, is an end of the wall or a corner that passes no twist on."""
    ends = [course(piece, np.array([0.0, piece.end])).along for piece in pieces]
    return [True, *(float(one[1] @ other[0]) < KINK for one, other in pairwise(ends)), True]


def _edges(piece: Piece, bent: list[bool]) -> list[float]:
    """Marks off the free or bent ends of a piece, where the twisting moment dies away within a third of the wall."""
    ends = np.array([0.0, piece.end])
    at = course(piece, ends)
    # In the thinnest walls the edge matters little, and short elements are stiff enough to drown the first modes.
    steps = np.maximum(_EDGE * at.wall_m, _LEAST * piece.end)
    radius, slanted = at.place_m[:, 0], np.abs(at.along[:, 0]) < 1.0 - 1e-9
    wanted = np.array(bent) & ((radius > steps) | ((radius == 0.0) & slanted))
    wanted &= 3.0 * steps < piece.end
    return [float(mark) for mark in np.abs(ends - steps)[wanted]]


def _ends(spec: BodySpec, piece: Piece, rigidity: Array, top: float, reach: tuple[float, float]) -> Array:
    """Ends of the elements between two parameters: shorter where waves, boundary layers or bends are."""
    edges = np.linspace(*reach, 4 * _LOOKS + 1)
    at = course(piece, 0.5 * (edges[1:] + edges[:-1]))
    length = np.linalg.norm(piece.curve(0.5 * (edges[1:] + edges[:-1]), 1), axis=1) * np.diff(edges)
    wave = _waves(spec.material, rigidity, at.wall_m, top) * _NODES_PER_WAVE / (2.0 * np.pi * ORDER)
    tightest = np.abs(at.curvature_1_m).max(axis=1)
    layer = np.sqrt(tightest / at.wall_m) / _LAYERS
    bend = np.abs(at.curvature_1_m[:, 0]) / _BEND
    way = np.concatenate(([0.0], np.cumsum(length * np.maximum(np.maximum(wave, layer), bend))))
    count = max(1, int(np.ceil(way[-1] - 1e-9)))
    ends = np.interp(np.arange(count + 1) / count, way / way[-1], edges)
    ends[0], ends[-1] = reach
    return np.asarray(ends)


def _thinned(spans: list[tuple[int, float, float]], most: int) -> list[tuple[int, float, float]]:
    """Join neighbours of one piece until there are at most so many elements, if that is possible."""
    while len(spans) > most:
        fewer = []
        k = 0
        while k < len(spans):
            if k + 1 < len(spans) and spans[k][0] == spans[k + 1][0]:
                fewer.append((spans[k][0], spans[k][1], spans[k + 1][2]))
                k += 2
            else:
                fewer.append(spans[k])
                k += 1
        if len(fewer) == len(spans):
            break
        spans = fewer
    return spans


def _number(
    pieces: tuple[Piece, ...],
    spans: tuple[tuple[int, float, float], ...],
    harmonics: int,
    rigidity: Array,
    warnings: tuple[str, ...],
) -> VesselLayout:
    reference = 0.5 * (1.0 + lobatto(ORDER))
    seen = [course(pieces[which], low + reference * (high - low)) for which, low, high in spans]
    nodes = Course(*(np.concatenate([getattr(at, key) for at in seen]) for key in Course.__dataclass_fields__))
    size = float(np.linalg.norm(np.ptp(nodes.place_m, axis=0)))
    closed = (bool(nodes.place_m[0, 0] < 1e-12 * size), bool(nodes.place_m[-1, 0] < 1e-12 * size))
    nodes = _upright(nodes, closed)
    number = np.zeros((len(spans), ORDER + 1, FIELDS), dtype=np.int64)
    count = 0
    for e in range(len(spans)):
        first = 0
        if e > 0:
            number[e, 0] = number[e - 1, -1]
            first = 1
            if float(np.linalg.norm(seen[e].along[0] - seen[e - 1].along[-1])) > _STRAIGHT:
                # At a corner the turn round the meridian is each side's own.
                number[e, 0, 4] = count
                count += 1
        rest = (ORDER + 1 - first) * FIELDS
        number[e, first:] = np.arange(count, count + rest).reshape(-1, FIELDS)
        count += rest
    return VesselLayout(
        pieces, spans, nodes, _arcs(pieces, spans), number, count, harmonics, closed, rigidity, warnings
    )


def _upright(nodes: Course, closed: tuple[bool, bool]) -> Course:
    """Let the fibres of the last element turn into the axis where a wall that is not quite flat meets it."""
    along, outward = nodes.along.copy(), nodes.outward.copy()
    share = 0.5 * (1.0 + lobatto(ORDER))[:, None]
    for shut, part, side, away in zip(
        closed, (slice(ORDER + 1), slice(-ORDER - 1, None)), (1.0, -1.0), (share, share[::-1]), strict=True
    ):
        if shut and abs(along[part][0 if side > 0.0 else -1, 0]) < 1.0 - 1e-9:
            lean = (1.0 - away) * np.array([0.0, -side]) + away * outward[part]
            outward[part] = lean / np.linalg.norm(lean, axis=1, keepdims=True)
            along[part] = np.stack((-outward[part][:, 1], outward[part][:, 0]), axis=1)
    return replace(nodes, along=along, outward=outward)


def _arcs(pieces: tuple[Piece, ...], spans: tuple[tuple[int, float, float], ...]) -> Array:
    reference = 0.5 * (1.0 + lobatto(ORDER))
    arcs, total = [], 0.0
    point, weight = np.polynomial.legendre.leggauss(12)
    for which, low, high in spans:
        ends = low + reference * (high - low)
        ways = [0.0]
        for a, b in pairwise(ends):
            p = 0.5 * (a + b) + 0.5 * (b - a) * point
            speed = np.linalg.norm(pieces[which].curve(p, 1), axis=1)
            ways.append(ways[-1] + float(0.5 * (b - a) * (weight @ speed)))
        arcs.append(total + np.array(ways))
        total += ways[-1]
    return np.stack(arcs)
