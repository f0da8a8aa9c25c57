"""Where the elements of a coil lie, its display mesh and its radiating slices."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from resonate.body.body import Radiator
from resonate.body.display import join, lattice
from resonate.body.helix import Helix
from resonate.body.section import Section, round_section
from resonate.body.spectral import Grid, line_grid
from resonate.body.waves import bending_wavenumber, top_frequency
from resonate.scene.model import BoxPlace, CoilShape, PointPlace

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.body import Surface
    from resonate.scene.model import BodySpec, MaterialSpec

    Array = NDArray[np.float64]

ORDER = 8
# Nodes for each wavelength of the highest wanted mode, the turning of the frame included.
_NODES_PER_WAVE = 6.0
# So many elements a turn follow the helix itself to 1e-8 of its radius.
_PER_TURN = 3.0
_BUDGET = 400
# A little more than is wanted, since the count of modes by wavelengths is an estimate; and the modes by which a
# straight wire is ahead of a coil, about four a turn.
_MARGIN = 1.15
_LATE_PER_TURN = 4.0
# Display mesh: rings a turn, corners of a ring, and the most rings.
_RINGS, _CORNERS, _MOST_RINGS = 20, 10, 800
_SLICES, _LEAST_SLICES, _MOST_SLICES = 16, 24, 800


@dataclass(frozen=True)
class CoilLayout:
    """A coil ready to be assembled: ``helix``, ``grid`` along the arc, ``section`` (one station) of the wire."""

    helix: Helix
    grid: Grid
    section: Section
    wire_m: float
    warnings: tuple[str, ...]


def _wavenumbers(section: Section, material: MaterialSpec, hertz: float) -> Array:
    omega, density, young = 2.0 * np.pi * hertz, material.density_kg_m3, material.young_pa[0]
    shear = section.shear_up * float(np.sqrt(material.shear_pa[0] * material.shear_pa[1]))
    bend = bending_wavenumber(
        omega,
        stiffness=young * section.up,
        inertia=density * section.area,
        turning=density * section.up,
        shear=shear * section.area,
    )
    stretch = omega * np.sqrt(density / young)
    twist = omega * np.sqrt(2.0 * density * section.up / section.torsion)
    return np.array([bend[0], bend[0], stretch, twist[0]])


def lay_coil(spec: BodySpec) -> CoilLayout:
    """Choose elements from the highest wanted frequency, within a budget."""
    shape, material = spec.shape, spec.material
    assert isinstance(shape, CoilShape)  # noqa: S101 (the caller sorts the kinds)
    helix = Helix(0.5 * shape.diameter_m, shape.pitch_m / (2.0 * np.pi), 2.0 * np.pi * shape.turns)
    section = round_section(
        np.full(1, shape.wire_m),
        np.zeros(1),
        shear_pa=float(np.sqrt(material.shear_pa[0] * material.shear_pa[1])),
        poisson=material.poisson[0],
    )
    length = helix.length_m

    def expected(hertz: float) -> float:
        return float(_wavenumbers(section, material, hertz).sum()) * length / np.pi

    wanted = int(_MARGIN * spec.modes.most + _LATE_PER_TURN * shape.turns) + 8
    top = top_frequency(expected, wanted=wanted, highest_hz=spec.modes.solved_or_default_hz)
    breaks = _breaks(spec, helix)
    waves = float(_wavenumbers(section, material, top).max()) + 1.0 / helix.stretch_m
    each_m = min(2.0 * np.pi / waves * ORDER / _NODES_PER_WAVE, 2.0 * np.pi * helix.stretch_m / _PER_TURN)
    counts = [max(1, int(np.ceil((stop - start) / each_m))) for start, stop in pairwise(breaks)]
    counts[0] = max(counts[0], 2) if len(counts) == 1 else counts[0]
    warnings: tuple[str, ...] = ()
    total = sum(counts)
    most = max(_BUDGET, int(np.ceil(_PER_TURN * shape.turns)) + len(counts))
    if total > most:
        counts = [max(1, int(count * most / total)) for count in counts]
        warnings = (
            f"body {spec.name!r}: {sum(counts)} elements instead of the {total} that {top:.0f} Hz asks for; "
            f"modes are resolved up to about {sum(counts) / total * top:.0f} Hz",
        )
    return CoilLayout(helix, line_grid(breaks, counts, ORDER), section, shape.wire_m, warnings)


def _breaks(spec: BodySpec, helix: Helix) -> Array:
    points: list[tuple[float, float, float]] = []
    marks = [0.0, helix.length_m]
    for hold in spec.support:
        if isinstance(hold.where, PointPlace):
            points.append(hold.where.point_m)
        elif isinstance(hold.where, BoxPlace):
            # Planes of the box across the axis; where a turn dips into it sideways, nodes decide.
            ends = np.array([hold.where.low_m[0], hold.where.high_m[0]]) / helix.rise_m * helix.stretch_m
            marks.extend(ends.tolist())
    if points:
        marks.extend(helix.nearest(np.array(points)).tolist())
    inside = np.unique(np.clip(np.array(marks), 0.0, helix.length_m))
    kept = inside[np.concatenate(([True], np.diff(inside) > 1e-6 * helix.length_m))]
    kept[-1] = helix.length_m
    return np.asarray(kept)


def skin(layout: CoilLayout) -> Surface:
    """Closed display mesh of the wire, its ends cut square."""
    helix = layout.helix
    rings = int(min(_MOST_RINGS, max(8, np.ceil(_RINGS * helix.angle / (2.0 * np.pi))))) + 1
    arc = np.linspace(0.0, helix.length_m, rings)
    place, frame = helix.place(arc), helix.frame(arc)
    around = np.linspace(0.0, 2.0 * np.pi, _CORNERS + 1)
    # From the outer side towards the binormal.
    spoke = -np.cos(around)[None, :, None] * frame[:, None, 1] + np.sin(around)[None, :, None] * frame[:, None, 2]
    rim = place[:, None] + 0.5 * layout.wire_m * spoke
    caps = [np.stack((np.broadcast_to(place[end], rim[end].shape), rim[end])) for end in (0, -1)]
    # Round the wire, then along it, is outward; the two ends face opposite ways.
    return join([lattice(rim), lattice(caps[0]), lattice(caps[1].transpose(1, 0, 2))])


def slices(layout: CoilLayout) -> Radiator:
    """Compact dipoles along the wire: displaced plus added volume across it, none along it.

    A slice that moves across the wire drives away its own volume of air and as much again (Lamb, Hydrodynamics,
    art. 68); one that slides along it drives none. For motion along a body axis that makes 2 (1 - t^2) of the volume,
    t the tangent's share of that axis; what it pushes sideways cancels over a turn and is left out.
    """
    helix = layout.helix
    count = int(np.clip(np.ceil(_SLICES * helix.angle / (2.0 * np.pi)), _LEAST_SLICES, _MOST_SLICES))
    arc = (np.arange(count) + 0.5) / count * helix.length_m
    frame = helix.frame(arc)
    volume = float(layout.section.area[0]) * helix.length_m / count
    weights = 2.0 * volume * (1.0 - frame[:, 0] ** 2)
    return Radiator("dipoles", helix.place(arc), -frame[:, 1], weights, half_m=0.5 * layout.wire_m)
