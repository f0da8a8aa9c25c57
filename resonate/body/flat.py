"""Plates and membranes in the x-z plane, +y up.

A plate stretches in its plane and bends with shear and rotary inertia (Reissner 1945, Mindlin 1951; isotropic or
orthotropic); polynomials of order 6 keep it free of locking in the thin limit. A membrane moves along y under
its tension. Fields of a plate: motion along x, y, z and turns about x and z; of a membrane: motion along y.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Literal

import numpy as np
from scipy.sparse import coo_matrix, csr_matrix

from resonate.body.body import Forms, HeatForm, Inertia, Radiator, Surface, SurfaceSpot
from resonate.body.described import Described
from resonate.body.display import join, quad_triangles
from resonate.body.energy import Strain, assemble, sample
from resonate.body.flat_layout import SHEAR, FlatLayout
from resonate.body.flat_spot import flat_spot
from resonate.body.heat import Heat
from resonate.body.reduce import bending_reach_m, reduced, tension_reach_m
from resonate.body.spectral import ROUNDING, Grid, basis, weld
from resonate.body.support import Held, Supports, supports
from resonate.errors import BodyError
from resonate.scene.model import BoxPlace, MembraneShape, NamedPlace

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.outline import Edge
    from resonate.scene.model import BodySpec, HoldSpec, SpotSpec

    Array = NDArray[np.float64]

# Plate fields: 0 u (x), 1 v (y), 2 w (z), 3 turn about x, 4 turn about z.
_PLATE = 5
_STRETCH: tuple[dict[tuple[int, int | None], float], ...] = (
    {(0, 0): 1.0},
    {(2, 1): 1.0},
    {(0, 1): 1.0, (2, 0): 1.0},
)
_CURVE: tuple[dict[tuple[int, int | None], float], ...] = (
    {(4, 0): -1.0},
    {(3, 1): 1.0},
    {(4, 1): -1.0, (3, 0): 1.0},
)
_SLIDE: tuple[dict[tuple[int, int | None], float], ...] = (
    {(1, 0): 1.0, (4, None): -1.0},
    {(1, 1): 1.0, (3, None): 1.0},
)
# Below this share of the longest extent, shear is softened and rotary inertia raised alike, as if for a thicker
# plate. Neither matters there (less than 1e-4 of the first modes), but rounding in a shear stiffness that grows as
# 1/thickness^4 against bending would drown the first modes.
_THIN = 6e-4
# Points of each element's side in the display mesh, at most this many vertices in all.
_VERTICES = 3000


def _blocks(*parts: Array) -> Array:
    size = sum(len(part) for part in parts)
    law = np.zeros((size, size))
    start = 0
    for part in parts:
        law[start : start + len(part), start : start + len(part)] = part
        start += len(part)
    return law


@dataclass(frozen=True)
class FlatBody(Described):
    """A plate or membrane; satisfies ``Body``. Parameters as for lines, with a flat layout."""

    spec: BodySpec
    layout: FlatLayout
    key: str
    temperature_k: float
    gravity_m_s2: float
    up: Array

    @property
    def is_skin(self) -> bool:
        """Membranes are skins, plates are walls."""
        return isinstance(self.spec.shape, MembraneShape)

    @property
    def family(self) -> Literal["line", "skin", "wall"]:
        """Which group of shapes it belongs to."""
        return "skin" if self.is_skin else "wall"

    @property
    def grid(self) -> Grid:
        """Elements in x and z."""
        return self.layout.grid

    @property
    def fields(self) -> int:
        """Fields of each node."""
        return 1 if self.is_skin else _PLATE

    @property
    def freedoms(self) -> int:
        """Fields times nodes."""
        return len(self.grid.nodes_m) * self.fields

    @property
    def thickness_m(self) -> float:
        """The wall."""
        return self.layout.thickness_m

    @property
    def linear_reach_m(self) -> float:
        """Deflection above which the linear energies are not enough."""
        if not self.is_skin:
            return bending_reach_m(self.thickness_m)
        strain = self.layout.tension_n_m / (self.thickness_m * float(self.layout.rigidity[:2, 0].sum()))
        return tension_reach_m(strain, float(np.ptp(self.grid.nodes_m, axis=0).min()))

    @cached_property
    def inertia(self) -> Inertia:
        """Mass properties, integrated with the same points and densities as the kinetic energy."""
        at = self.grid.quadrature()
        sheet = self.spec.material.density_kg_m3 * self.thickness_m
        weight = sheet * at.weight.ravel()
        place = at.place_m.reshape(-1, 2)
        mass = float(weight.sum())
        centre = weight @ place / mass
        x, z = (place - centre).T
        turn = mass * self.thickness_m**2 / 12.0
        xx, zz, xz = float(weight @ x**2), float(weight @ z**2), float(weight @ (x * z))
        tensor = np.array([[zz + turn, 0.0, -xz], [0.0, xx + zz, 0.0], [-xz, 0.0, xx + turn]])
        return Inertia(mass, np.array([centre[0], 0.0, centre[1]]), tensor)

    @cached_property
    def surface(self) -> Surface:
        """Closed display mesh: two faces and the rim."""
        per_side = int(np.clip(np.sqrt(0.5 * _VERTICES / len(self.grid.elements)), 1, self.grid.order))
        line = np.linspace(-1.0, 1.0, per_side + 1)
        local = np.stack(np.meshgrid(line, line, indexing="ij"), axis=2).reshape(-1, 2)
        value, _ = basis(self.grid.order, local)
        mesh = weld(np.einsum("qk,ekd->eqd", value, self.grid.nodes_m[self.grid.elements]), per_side)
        flat, number = mesh.nodes_m, mesh.elements.reshape(-1, per_side + 1, per_side + 1)
        quads = np.stack(
            (number[:, :-1, :-1], number[:, :-1, 1:], number[:, 1:, 1:], number[:, 1:, :-1]), axis=3
        ).reshape(-1, 4)
        quads = _facing(flat, quads)
        half = 0.5 * self.thickness_m
        top = np.stack((flat[:, 0], np.full(len(flat), half), flat[:, 1]), axis=1)
        bottom = top * np.array([1.0, -1.0, 1.0])
        triangles = quad_triangles(quads)
        sides = np.concatenate([quads[:, [k, (k + 1) % 4]] for k in range(4)])
        pairs = {(int(a), int(b)) for a, b in sides}
        rim = np.array([(a, b) for a, b in sides if (int(b), int(a)) not in pairs])
        wall = np.concatenate((bottom, top))
        strip = np.stack((rim[:, 0], rim[:, 0] + len(flat), rim[:, 1] + len(flat), rim[:, 1]), axis=1)
        return join([(top, triangles), (bottom, triangles[:, ::-1]), (wall, quad_triangles(strip)[:, ::-1])])

    @cached_property
    def radiator(self) -> Radiator:
        """Integration points of the middle face with their areas."""
        at = self.grid.quadrature()
        place = at.place_m.reshape(-1, 2)
        points = np.stack((place[:, 0], np.zeros(len(place)), place[:, 1]), axis=1)
        weights = np.zeros_like(points)
        weights[:, 0] = at.weight.ravel()
        return Radiator("baffled", points, np.broadcast_to([0.0, 1.0, 0.0], points.shape).copy(), weights)

    def motion(self, points_m: Array) -> csr_matrix:
        """Three displacements and three rotations (6 k, d) of material points (k, 3)."""
        points = np.atleast_2d(points_m)
        element, local, _ = self.grid.locate(points[:, [0, 2]])
        value, _ = basis(self.grid.order, local)
        value = np.where(np.abs(value) < ROUNDING, 0.0, value)
        half = 0.5 * self.thickness_m
        y = np.clip(points[:, 1], -half, half)
        gain = np.zeros((len(points), 6, self.fields))
        if self.is_skin:
            gain[:, 1, 0] = 1.0
        else:
            gain[:, [0, 1, 2, 3, 5], [0, 1, 2, 3, 4]] = 1.0
            gain[:, 0, 4], gain[:, 2, 3] = -y, y
        rows_local = np.einsum("paf,pk->pakf", gain, value)
        nodes = self.grid.elements[element]
        columns = nodes[:, None, :, None] * self.fields + np.arange(self.fields)
        columns = np.broadcast_to(columns, rows_local.shape).ravel()
        rows = np.repeat(np.arange(len(points) * 6), value.shape[1] * self.fields)
        keep = rows_local.ravel() != 0.0
        shape = (len(points) * 6, self.freedoms)
        return csr_matrix(coo_matrix((rows_local.ravel()[keep], (rows[keep], columns[keep])), shape=shape))

    def probe(self, points_m: Array) -> csr_matrix:
        """Displacement (3 k, d) of the material points nearest to ``points_m`` (k, 3)."""
        count = len(np.atleast_2d(points_m))
        return self.motion(points_m)[(np.arange(count)[:, None] * 6 + np.arange(3)).ravel()]

    def turn(self, point_m: Array) -> csr_matrix:
        """Rotation (3, d) of the matter nearest to a point (3,); about y that of the middle face in its plane."""
        element, local, _ = self.grid.locate(point_m[None, [0, 2]])
        rows = self.motion(point_m)[3:].tolil()
        if self.is_skin:
            return rows.tocsr()
        nodes = self.grid.elements[element[0]]
        _, slope = basis(self.grid.order, local)
        gradient = slope[0] @ np.linalg.inv(self.grid.nodes_m[nodes].T @ slope[0])
        rows[1, nodes * self.fields] = 0.5 * gradient[:, 1]
        rows[1, nodes * self.fields + 2] = -0.5 * gradient[:, 0]
        return rows.tocsr()

    def unused(self) -> NDArray[np.int64]:
        """Every freedom moves."""
        return np.zeros(0, dtype=np.int64)

    def select(self, hold: HoldSpec) -> Held:
        """Find the material points of one support."""
        where, nodes = hold.where, self.grid.nodes_m
        if isinstance(where, NamedPlace):
            chosen: list[Edge] = []
            for name in where.names:
                chosen.extend(self.layout.edges.values() if name == "edge" else [self.layout.edges[name]])
            at = np.concatenate([edge.nodes for edge in chosen])
            outward = np.concatenate([edge.outward for edge in chosen])
            length = np.concatenate([edge.length_m for edge in chosen])
            return Held.of(_lift(nodes[at]), length, outward=_lift(outward), places=len(where.names))
        if isinstance(where, BoxPlace):
            low, high = np.array(where.low_m), np.array(where.high_m)
            slack = 1e-9 * float(np.ptp(nodes, axis=0).max())
            inside = np.all((nodes >= low[[0, 2]] - slack) & (nodes <= high[[0, 2]] + slack), axis=1)
            half = 0.5 * self.thickness_m
            inside &= (low[1] <= half) & (high[1] >= -half)
            points = _lift(nodes[inside])
            size = self.grid.measure()[inside]
        else:
            points, size = self._nearest(np.array(where.point_m)), np.ones(1)
        if len(points) == 0:
            raise BodyError(
                what="the box of a support holds no point of the mesh",
                where=f"body {self.name!r}",
                fix="make the box larger, or support a point",
            )
        return Held.of(points, size)

    def _nearest(self, point: Array) -> Array:
        _, _, miss = self.grid.locate(point[None, [0, 2]])
        size = float(np.ptp(self.grid.nodes_m, axis=0).max())
        off = float(np.hypot(miss[0], max(abs(point[1]) - 0.5 * self.thickness_m, 0.0)))
        if off > 0.05 * size:
            raise BodyError(
                what=f"a support at {point.tolist()} m, {off:g} m off the body",
                where=f"body {self.name!r}",
                fix="give a point on the body, in its own frame",
            )
        return point[None]

    def spot(self, spot: SpotSpec) -> SurfaceSpot:
        """Find a spot on the surface."""
        return flat_spot(self.spec, self.layout, spot, self.inertia.centre_m[[0, 2]])

    @cached_property
    def supports(self) -> Supports:
        """Supports over all freedoms."""
        weight = 0.0 if self.spec.floating else self.inertia.mass_kg * self.gravity_m_s2
        centre = self.inertia.centre_m
        return supports(self, self.spec.support, up=self.up, weight_n=weight, centre_m=centre, line=False)

    def forms(self) -> Forms:
        """Assemble T and V."""
        at = self.grid.quadrature()
        thick, density = self.thickness_m, self.spec.material.density_kg_m3
        if self.is_skin:
            slope = Strain.of(1, 2, {(0, 0): 1.0}, {(0, 1): 1.0})
            stiffness = assemble(self.grid, at, slope, self.layout.tension_n_m * np.eye(2))
            mass = assemble(self.grid, at, Strain.of(1, 2, {(0, None): 1.0}), np.array([[density * thick]]))
            return reduced(stiffness, mass, self.supports, ())
        plane, shear = self.layout.rigidity, self.spec.material.shear_pa
        stout = max(1.0, _THIN * float(np.ptp(self.grid.nodes_m, axis=0).max()) / thick)
        slide = SHEAR * thick / stout**2 * np.diag([shear[1], shear[2]])
        turning = thick**3 / 12.0 * stout**2
        law = _blocks(thick * plane, thick**3 / 12.0 * plane, slide)
        strain = Strain.of(_PLATE, 2, *_STRETCH, *_CURVE, *_SLIDE)
        heavy = density * np.diag([thick, thick, thick, turning, turning])
        moves = Strain.still(_PLATE, 2)
        stiffness = assemble(self.grid, at, strain, law)
        mass = assemble(self.grid, at, moves, heavy)
        return reduced(stiffness, mass, self.supports, self._heat())

    def _heat(self) -> tuple[HeatForm, ...]:
        heat = Heat.of(self.spec.material, self.temperature_k)
        if heat is None:
            return ()
        at = self.grid.quadrature()
        plane, thick = self.layout.rigidity, self.thickness_m
        # What heats is the sum of the two bending stresses; in cylindrical bending this is Zener's strength
        # times (1 + nu)/(1 - nu), as for waves in plates (Chaigne & Lambourg 2001).
        first, second = float(plane[0, 0] + plane[0, 1]), float(plane[1, 1] + plane[0, 1])
        mixed: dict[tuple[int, int | None], float] = {(4, 0): -first, (3, 1): second}
        gain = np.sqrt(heat.per_pascal * thick**3 / 12.0 * at.weight)[..., None]
        operator = sample(self.grid, at, Strain.of(_PLATE, 2, mixed), gain)
        relax = thick**2 / (np.pi**2 * heat.diffusivity_m2_s)
        return (HeatForm(operator, np.full(operator.shape[0], relax)),)


def _lift(flat: Array) -> Array:
    return np.stack((flat[:, 0], np.zeros(len(flat)), flat[:, 1]), axis=1)


def _facing(flat: Array, quads: NDArray[np.int64]) -> NDArray[np.int64]:
    # Wind every quadrilateral so that its normal is +y (from z to x).
    a, b, c, d = (flat[quads[:, k]] for k in range(4))
    first, second = c - a, d - b
    up = first[:, 1] * second[:, 0] - first[:, 0] * second[:, 1]
    return np.where((up < 0.0)[:, None], quads[:, ::-1], quads)
