"""Where the elements of a line lie, and what its section is at every station."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from resonate.body.section import Section, rectangle, round_section
from resonate.body.spectral import Grid, line_grid
from resonate.body.waves import bending_wavenumber, top_frequency
from resonate.scene.model import BarShape, BoxPlace, PointPlace, StringShape, TubeShape

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.scene.model import BodySpec, MaterialSpec

    Array = NDArray[np.float64]

ORDER = 8
# Nodes for each wavelength of the highest wanted mode; 6 keeps its frequency within about 1e-6.
_NODES_PER_WAVE = 6.0
# Drawn nylon bears some 20 %, steel wire 1.5 %.
_STRAIN = 0.2
# Largest number of elements; at order 8 about 3,200 nodes.
_BUDGET = 400
# A little more than is wanted, since the count of modes by wavelengths is an estimate.
_MARGIN = 1.15
_SAMPLES = 257


@dataclass(frozen=True)
class Layout:
    """A line ready to be assembled.

    ``grid`` elements along x; ``tension_n`` 0 but for strings; ``rows`` (r, 3) fraction, height, width of a
    rectangular bar; ``outer_m``, ``inner_m`` of a round one (0 for rectangles).
    """

    length_m: float
    grid: Grid
    material: MaterialSpec
    rows: Array
    outer_m: float
    inner_m: float
    tension_n: float
    warnings: tuple[str, ...]

    @property
    def is_round(self) -> bool:
        """Round sections are given by their diameters."""
        return self.outer_m > 0.0

    def section_at(self, x_m: Array) -> Section:
        """Section at stations of any shape; a step is taken from the element that asks."""
        return _section(self, x_m)

    def stations(self, count: int) -> Array:
        """About ``count`` stations from end to end, every break of the profile included."""
        breaks = self.rows[:, 0] * self.length_m if len(self.rows) else np.zeros(0)
        even = np.linspace(0.0, self.length_m, count)
        tiny = 1e-7 * self.length_m
        steps = breaks[1:][np.diff(breaks) == 0.0]
        breaks = np.concatenate((breaks, steps - tiny, steps + tiny))
        return np.unique(np.concatenate((even, breaks[(breaks >= 0.0) & (breaks <= self.length_m)])))


def _section(layout: Layout, x_m: Array) -> Section:
    material = layout.material
    shear_across, shear_up = material.shear_pa[0], material.shear_pa[1]
    if layout.is_round:
        outer = np.full(x_m.shape, layout.outer_m)
        mean = float(np.sqrt(shear_up * shear_across))
        return round_section(
            outer, np.full(x_m.shape, layout.inner_m), shear_pa=mean, poisson=material.poisson[0]
        )
    height, width = profile_at(layout.rows, x_m / layout.length_m)
    return rectangle(
        width, height, shear_up_pa=shear_up, shear_across_pa=shear_across, poisson=material.poisson[0]
    )


def profile_at(rows: Array, fraction: Array) -> tuple[Array, Array]:
    """Height and width at fractions of the length; linear between rows, a repeated fraction is a step."""
    after = np.clip(np.searchsorted(rows[:, 0], fraction, side="right"), 1, len(rows) - 1)
    before = after - 1
    span = rows[after, 0] - rows[before, 0]
    share = np.where(span > 0.0, (fraction - rows[before, 0]) / np.where(span > 0.0, span, 1.0), 1.0)
    share = np.clip(share, 0.0, 1.0)
    height = rows[before, 1] + share * (rows[after, 1] - rows[before, 1])
    width = rows[before, 2] + share * (rows[after, 2] - rows[before, 2])
    return height, width


def _profile_rows(shape: BarShape) -> Array:
    if shape.profile:
        return np.array(shape.profile)
    ends = (shape.height_m or 0.0, shape.width_m or 0.0)
    return np.array([[0.0, *ends], [1.0, *ends]])


def _wavenumbers(layout: Layout, x_m: Array, hertz: float) -> Array:
    # Rows: the kinds of waves that the line carries, each a density of half waves along x.
    section, material = layout.section_at(x_m), layout.material
    omega, density, young = 2.0 * np.pi * hertz, material.density_kg_m3, material.young_pa[0]
    kinds = []
    planes = (
        (section.up, section.shear_up * material.shear_pa[1]),
        (section.across, section.shear_across * material.shear_pa[0]),
    )
    area = np.maximum(section.area, 1e-9 * float(section.area.max()))
    for second, shear in planes:
        kinds.append(
            bending_wavenumber(
                omega,
                stiffness=young * second,
                inertia=density * area,
                turning=density * second,
                shear=shear * area,
                pull=layout.tension_n,
            )
        )
    if layout.tension_n == 0.0:
        kinds.append(np.full_like(area, omega * np.sqrt(density / young)))
        polar = density * (section.up + section.across)
        kinds.append(omega * np.sqrt(polar / np.maximum(section.torsion, 1e-300)))
    return np.stack(kinds)


def lay_line(spec: BodySpec) -> Layout:
    """Choose elements from the highest wanted frequency, within a budget."""
    shape = spec.shape
    assert isinstance(shape, BarShape | TubeShape | StringShape)  # noqa: S101 (the caller sorts the kinds)
    rows, outer, inner, tension = np.zeros((0, 3)), 0.0, 0.0, 0.0
    if isinstance(shape, TubeShape):
        outer, inner = shape.outer_m, shape.outer_m - 2.0 * shape.wall_m
    elif isinstance(shape, StringShape):
        outer, tension = shape.diameter_m, shape.tension_n
    elif shape.diameter_m is not None:
        outer = shape.diameter_m
    else:
        rows = _profile_rows(shape)
    length = shape.length_m
    coarse = line_grid(np.array([0.0, length]), [1], ORDER)
    draft = Layout(length, coarse, spec.material, rows, outer, inner, tension, ())
    middle = (np.arange(_SAMPLES) + 0.5) / _SAMPLES * length

    def expected(hertz: float) -> float:
        return float(_wavenumbers(draft, middle, hertz).mean(axis=1).sum()) * length / np.pi

    top = top_frequency(
        expected, wanted=int(_MARGIN * spec.modes.most) + 8, highest_hz=spec.modes.solved_or_default_hz
    )
    breaks = _breaks(spec, rows, length)
    counts, warnings = _counts(draft, breaks, top, spec.name)
    warnings = (*warnings, *_stretched(spec, tension, outer))
    return Layout(length, line_grid(breaks, counts, ORDER), spec.material, rows, outer, inner, tension, warnings)


def _stretched(spec: BodySpec, tension_n: float, diameter_m: float) -> tuple[str, ...]:
    """Warn about a string that no wire or thread would bear; its linear stiffness says so."""
    if tension_n == 0.0:
        return ()
    stress = tension_n / (0.25 * np.pi * diameter_m**2)
    strain = stress / spec.material.young_pa[0]
    if strain < _STRAIN:
        return ()
    return (
        f"body {spec.name!r}: its tension of {tension_n:g} N is a stress of {stress / 1e9:.3g} GPa and stretches it by "
        f"{100.0 * strain:.3g} %; a real string would break or be another string",
    )


def _breaks(spec: BodySpec, rows: Array, length: float) -> Array:
    marks = [0.0, length, *(rows[:, 0] * length).tolist()]
    for hold in spec.support:
        if isinstance(hold.where, PointPlace):
            marks.append(hold.where.point_m[0])
        elif isinstance(hold.where, BoxPlace):
            marks.extend((hold.where.low_m[0], hold.where.high_m[0]))
    inside = np.unique(np.clip(np.array(marks), 0.0, length))
    apart = np.concatenate(([True], np.diff(inside) > 1e-6 * length))
    kept = inside[apart]
    kept[-1] = length
    return kept


def _counts(draft: Layout, breaks: Array, top_hz: float, name: str) -> tuple[list[int], tuple[str, ...]]:
    counts = []
    for start, stop in pairwise(breaks):
        x = start + (np.arange(17) + 0.5) / 17 * (stop - start)
        waves = float(_wavenumbers(draft, x, top_hz).mean(axis=1).max()) * (stop - start) / (2.0 * np.pi)
        counts.append(max(1, int(np.ceil(waves * _NODES_PER_WAVE / ORDER))))
    if len(counts) == 1:
        counts[0] = max(counts[0], 2)
    total = sum(counts)
    if total <= _BUDGET:
        return counts, ()
    counts = [max(1, int(count * _BUDGET / total)) for count in counts]
    share = sum(counts) / total
    return counts, (
        f"body {name!r}: {sum(counts)} elements instead of the {total} that {top_hz:.0f} Hz asks for; "
        f"modes are resolved up to about {share * top_hz:.0f} Hz",
    )
