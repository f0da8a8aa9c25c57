"""Bars, tubes and strings: a three-dimensional shear-flexible line.

Each node moves along x, y, z and turns about x, y, z. Energies per length (Timoshenko 1921; Cowper 1966):
stretching E A u'^2, bending E I (turn')^2 in two planes, shear kappa G A (slope - turn)^2, St-Venant torsion
G J (twist')^2, tension T (slope)^2; translation and rotary inertia. Polynomials of order 8 do not lock.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Literal

import numpy as np
from scipy.sparse import coo_matrix, csr_matrix

from resonate.body.body import Forms, HeatForm, Inertia, Radiator, Surface, SurfaceSpot
from resonate.body.described import Described
from resonate.body.display import join, lattice
from resonate.body.energy import Strain, assemble, sample
from resonate.body.heat import Heat
from resonate.body.line_spot import line_spot
from resonate.body.reduce import bending_reach_m, reduced, tension_reach_m
from resonate.body.spectral import ROUNDING, Grid, basis
from resonate.body.support import Held, Supports, supports
from resonate.errors import BodyError
from resonate.scene.model import BoxPlace, NamedPlace

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.line_layout import Layout
    from resonate.body.section import Section
    from resonate.scene.model import BodySpec, HoldSpec, SpotSpec

    Array = NDArray[np.float64]

FIELDS = 6
_MOVE = Strain.still(FIELDS, 1)
_STRAINS = Strain.of(
    FIELDS,
    1,
    {(0, 0): 1.0},
    {(1, 0): 1.0, (5, None): -1.0},
    {(2, 0): 1.0, (4, None): 1.0},
    {(3, 0): 1.0},
    {(4, 0): 1.0},
    {(5, 0): 1.0},
    {(1, 0): 1.0},
    {(2, 0): 1.0},
)
_BENDS = Strain.of(FIELDS, 1, {(5, 0): 1.0}, {(4, 0): 1.0})
_STATIONS = 65
# A support this close to the middle, as a share of the width, is in the middle.
_MIDDLE = 1e-3
# Below this radius of gyration, as a share of the length, shear and rotary inertia act as if it were larger.
_THIN = 5e-5
_ROUND_STEPS = 16


def _diagonal(*entries: Array) -> Array:
    stacked = np.stack(entries, axis=-1)
    return stacked[..., :, None] * np.eye(stacked.shape[-1])


@dataclass(frozen=True)
class LineBody(Described):
    """A line body; satisfies ``Body``.

    Parameters
    ----------
    spec : BodySpec
        What the scene asks.
    layout : Layout
        Grid, section and tension.
    key : str
        Content hash.
    temperature_k, gravity_m_s2 : float
        Of the surroundings (thermoelastic loss, cords).
    up : Array
        (3,) unit vector against gravity in the body frame.
    """

    spec: BodySpec
    layout: Layout
    key: str
    temperature_k: float
    gravity_m_s2: float
    up: Array
    family: Literal["line", "skin", "wall"] = "line"

    @property
    def grid(self) -> Grid:
        """Elements along x."""
        return self.layout.grid

    @property
    def freedoms(self) -> int:
        """Six for each node."""
        return len(self.grid.nodes_m) * FIELDS

    @property
    def thickness_m(self) -> float:
        """Smallest size across the line."""
        ends = self.layout.section_at(np.linspace(0.0, self.layout.length_m, _STATIONS))
        sizes = np.minimum(ends.height, ends.width)
        return float(np.min(sizes[sizes > 0.0]))

    @property
    def linear_reach_m(self) -> float:
        """Deflection above which the linear energies are not enough."""
        if self.layout.tension_n == 0.0:
            return bending_reach_m(self.thickness_m)
        area = float(self.layout.section_at(np.zeros(1)).area[0])
        return tension_reach_m(self.layout.tension_n / (self.spec.material.young_pa[0] * area), self.layout.length_m)

    @cached_property
    def inertia(self) -> Inertia:
        """Mass properties, integrated with the same points and densities as the kinetic energy."""
        at = self.grid.quadrature()
        section = self.layout.section_at(at.place_m[..., 0])
        density = self.spec.material.density_kg_m3
        x = at.place_m[..., 0]
        line = density * section.area * at.weight
        mass = float(line.sum())
        centre = float((line * x).sum()) / mass
        across = float((density * section.across * at.weight).sum())
        up = float((density * section.up * at.weight).sum())
        swing = float((line * (x - centre) ** 2).sum())
        tensor = np.diag([up + across, swing + across, swing + up])
        return Inertia(mass, np.array([centre, 0.0, 0.0]), tensor)

    @cached_property
    def surface(self) -> Surface:
        """Closed display mesh with crisp edges."""
        x = self.layout.stations(_STATIONS)
        section = self.layout.section_at(x)
        if self.layout.is_round:
            angle = np.linspace(0.0, 2.0 * np.pi, _ROUND_STEPS + 1)
            rim = np.stack((np.zeros_like(angle), np.cos(angle), np.sin(angle)), axis=1)
            skin = 0.5 * section.height[:, None, None] * rim[None]
            skin[..., 0] += x[:, None]
            caps = [np.stack((np.broadcast_to([x[end], 0.0, 0.0], skin[end].shape), skin[end])) for end in (0, -1)]
            sheets = [skin, *caps]
        else:
            half_up, half_across = 0.5 * section.height, 0.5 * section.width
            corner = {
                (a, b): np.stack((x, a * half_up, b * half_across), axis=1) for a in (-1, 1) for b in (-1, 1)
            }
            pairs = [((1, -1), (1, 1)), ((-1, -1), (-1, 1)), ((-1, 1), (1, 1)), ((-1, -1), (1, -1))]
            sheets = [np.stack((corner[a], corner[b]), axis=1) for a, b in pairs]
            for end in (0, -1):
                face = [[corner[a, b][end] for b in (-1, 1)] for a in (-1, 1)]
                sheets.append(np.array(face))
        centre = np.array([0.5 * self.layout.length_m, 0.0, 0.0])
        return join([lattice(sheet) for sheet in sheets], centre)

    @cached_property
    def radiator(self) -> Radiator:
        """Slices with the volume they displace plus the air they carry along (Lamb 1932, sec. 71)."""
        at = self.grid.quadrature()
        x = at.place_m[..., 0].ravel()
        section = self.layout.section_at(x)
        length = at.weight.ravel()
        outer = np.pi / 4.0 * section.height**2 if self.layout.is_round else section.height * section.width
        volume = np.stack(
            (outer, outer + np.pi / 4.0 * section.width**2, outer + np.pi / 4.0 * section.height**2), axis=1
        )
        points = np.stack((x, np.zeros_like(x), np.zeros_like(x)), axis=1)
        normals = np.broadcast_to([0.0, 1.0, 0.0], points.shape).copy()
        return Radiator("dipoles", points, normals, volume * length[:, None])

    def motion(self, points_m: Array) -> csr_matrix:
        """Three displacements and three rotations (6 k, d) of material points (k, 3)."""
        points = np.atleast_2d(points_m)
        element, local, _ = self.grid.locate(points[:, :1])
        value, _ = basis(self.grid.order, local)
        value = np.where(np.abs(value) < ROUNDING, 0.0, value)
        section = self.layout.section_at(points[:, 0])
        y = np.clip(points[:, 1], -0.5 * section.height, 0.5 * section.height)
        z = np.clip(points[:, 2], -0.5 * section.width, 0.5 * section.width)
        gain = np.broadcast_to(np.eye(FIELDS), (len(points), FIELDS, FIELDS)).copy()
        gain[:, 0, 4], gain[:, 0, 5] = z, -y
        gain[:, 1, 3], gain[:, 2, 3] = -z, y
        local_rows = np.einsum("paf,pk->pakf", gain, value)
        nodes = self.grid.elements[element]
        columns = nodes[:, None, :, None] * FIELDS + np.arange(FIELDS)
        columns = np.broadcast_to(columns, local_rows.shape).ravel()
        rows = np.repeat(np.arange(len(points) * FIELDS), value.shape[1] * FIELDS)
        keep = local_rows.ravel() != 0.0
        shape = (len(points) * FIELDS, self.freedoms)
        return csr_matrix(coo_matrix((local_rows.ravel()[keep], (rows[keep], columns[keep])), shape=shape))

    def probe(self, points_m: Array) -> csr_matrix:
        """Displacement (3 k, d) of the material points nearest to ``points_m`` (k, 3)."""
        count = len(np.atleast_2d(points_m))
        return self.motion(points_m)[(np.arange(count)[:, None] * FIELDS + np.arange(3)).ravel()]

    def turn(self, point_m: Array) -> csr_matrix:
        """Rotation (3, d) of the section nearest to a point (3,)."""
        return self.motion(point_m)[3:]

    def unused(self) -> NDArray[np.int64]:
        """A string neither stretches nor twists."""
        if self.layout.tension_n == 0.0:
            return np.zeros(0, dtype=np.int64)
        nodes = np.arange(len(self.grid.nodes_m))[:, None] * FIELDS
        return np.asarray((nodes + np.array([0, 3])).ravel(), dtype=np.int64)

    def select(self, hold: HoldSpec) -> Held:
        """Find the material points of one support."""
        where = hold.where
        length = self.layout.length_m
        if isinstance(where, NamedPlace):
            points = np.array([[0.0 if name == "left" else length, 0.0, 0.0] for name in where.names])
            return Held.of(points, np.ones(len(points)), places=len(points))
        if isinstance(where, BoxPlace):
            x = self.grid.nodes_m[:, 0]
            inside = (x >= where.low_m[0] - 1e-9 * length) & (x <= where.high_m[0] + 1e-9 * length)
            if not all(low <= 0.5 * size and high >= -0.5 * size for low, high, size in self._extent(where)):
                inside = np.zeros_like(inside)
            points = np.stack((x, 0.0 * x, 0.0 * x), axis=1)[inside]
            whole = np.asarray(inside[self.grid.elements].all(axis=1), dtype=np.bool_)
            size = self.grid.measure(whole)[inside]
        else:
            points = self._nearest(np.array(where.point_m))
            # In the middle of the section it stands for a post as wide as that, so that the bar does not roll on it.
            width = float(self.layout.section_at(points[:1, 0]).width[0])
            middle = abs(points[0, 2]) < _MIDDLE * width
            return Held(points, np.ones(1), strip_m=width if middle else 0.0)
        if len(points) == 0:
            raise BodyError(
                what="the box of a support holds no part of the body",
                where=f"body {self.name!r}",
                fix=f"the body runs from x = 0 to {length:g} m, round y = z = 0",
            )
        return Held.of(points, size)

    def _extent(self, where: BoxPlace) -> list[tuple[float, float, float]]:
        middle = self.layout.section_at(np.linspace(0.0, self.layout.length_m, _STATIONS))
        sizes = float(middle.height.max()), float(middle.width.max())
        return [(where.low_m[k], where.high_m[k], sizes[k - 1]) for k in (1, 2)]

    def _nearest(self, point: Array) -> Array:
        x = float(np.clip(point[0], 0.0, self.layout.length_m))
        section = self.layout.section_at(np.array([x]))
        half = 0.5 * np.array([section.height[0], section.width[0]])
        near = np.array([[x, *np.clip(point[1:], -half, half)]])
        miss = float(np.linalg.norm(near[0] - point))
        if miss > 0.05 * self.layout.length_m:
            raise BodyError(
                what=f"a support at {point.tolist()} m, {miss:g} m off the body",
                where=f"body {self.name!r}",
                fix="give a point on the body, in its own frame",
            )
        return near

    def spot(self, spot: SpotSpec) -> SurfaceSpot:
        """Find a spot on the surface."""
        return line_spot(self.spec, self.layout, spot, self.inertia.centre_m)

    @cached_property
    def supports(self) -> Supports:
        """Supports over all freedoms."""
        weight = 0.0 if self.spec.floating else self.inertia.mass_kg * self.gravity_m_s2
        return supports(self, self.spec.support, up=self.up, weight_n=weight, centre_m=self.inertia.centre_m, line=True)

    def forms(self) -> Forms:
        """Assemble T and V."""
        at = self.grid.quadrature()
        section = self.layout.section_at(at.place_m[..., 0])
        material, tension = self.spec.material, self.layout.tension_n
        density, young = material.density_kg_m3, material.young_pa[0]
        pull = np.full_like(section.area, tension)
        up, across = (self._stout(second, section.area) for second in (section.up, section.across))
        stiff = _diagonal(
            young * section.area,
            section.shear_up * material.shear_pa[1] * section.area / up,
            section.shear_across * material.shear_pa[0] * section.area / across,
            section.torsion,
            young * section.across,
            young * section.up,
            pull,
            pull,
        )
        heavy = _diagonal(
            *(3 * (density * section.area,)),
            density * (section.up + section.across),
            density * section.across * across,
            density * section.up * up,
        )
        stiffness = assemble(self.grid, at, _STRAINS, stiff)
        mass = assemble(self.grid, at, _MOVE, heavy)
        return reduced(stiffness, mass, self.supports, self._heat(section))

    def _stout(self, second: Array, area: Array) -> Array:
        """How much to soften shear and raise rotary inertia, so that rounding leaves the first modes of a wire."""
        least = area * (_THIN * self.layout.length_m) ** 2
        return np.asarray(np.maximum(1.0, least / np.maximum(second, 1e-9 * least)))

    def _heat(self, section: Section) -> tuple[HeatForm, ...]:
        heat = Heat.of(self.spec.material, self.temperature_k)
        if heat is None:
            return ()
        at = self.grid.quadrature()
        young = self.spec.material.young_pa[0]
        strength = heat.per_pascal * young**2
        second = np.stack((section.up, section.across), axis=-1)
        gain = np.sqrt(strength * second * at.weight[..., None])
        relax = np.stack((section.relax_up, section.relax_across), axis=-1) / heat.diffusivity_m2_s
        return (HeatForm(sample(self.grid, at, _BENDS, gain), relax.ravel()),)
