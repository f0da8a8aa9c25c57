"""Coils: the shear-flexible line of ``line.py`` along a helix.

The six fields are moves along and turns about the body's own x, y, z, polynomials of the arc length. Strains are those
of a curved line, exact in its frame R(s) (rows: tangent t, normal, binormal): stretch and shear ``R (u' + t x turn)``,
bending and twist ``R turn'`` (Love, A Treatise on the Mathematical Theory of Elasticity, ch. 18; with shear: Wittrick,
Int. J. Mech. Sci. 8 (1966) 25).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Literal

import numpy as np
from scipy.sparse import bsr_array, coo_matrix, csr_matrix

from resonate.body.body import Forms, HeatForm, Inertia, Radiator, Surface, SurfaceSpot
from resonate.body.coil_layout import skin, slices
from resonate.body.coil_spot import coil_spot
from resonate.body.described import Described
from resonate.body.energy import Strain, assemble, sample
from resonate.body.heat import Heat
from resonate.body.reduce import reduced
from resonate.body.spectral import ROUNDING, Grid, basis
from resonate.body.support import Held, Supports, supports
from resonate.errors import BodyError
from resonate.scene.model import BoxPlace, NamedPlace

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.coil_layout import CoilLayout
    from resonate.body.spectral import Quadrature
    from resonate.scene.model import BodySpec, HoldSpec, SpotSpec

    Array = NDArray[np.float64]

FIELDS = 6
_MOVE = Strain.still(FIELDS, 1)
# Slopes of the moves, the turns, slopes of the turns: what the strains of a curved line are made of.
_UNIT = np.eye(FIELDS)
_NONE = np.zeros((3, FIELDS, 1))
_PARTS = Strain(
    np.concatenate((0.0 * _UNIT[:3], _UNIT[3:], 0.0 * _UNIT[3:])),
    np.concatenate((_UNIT[:3, :, None], _NONE, _UNIT[3:, :, None])),
)
_TURN_SLOPES = Strain(np.zeros((3, FIELDS)), _UNIT[3:, :, None])
# A coil that moves by this share of its diameter is no longer the helix whose stiffness it has.
_BENT = 0.1
# Below this radius of gyration, as a share of the length, shear and rotary inertia act as if it were larger.
_THIN = 5e-5
# A point further off than this share of the coil's size is a mistake, not a rounding.
_REACH = 0.05


def _crossing(vector: Array) -> Array:
    """Matrices (.., 3, 3) of ``vector x``."""
    x, y, z = np.moveaxis(vector, -1, 0)
    none = np.zeros_like(x)
    rows = ((none, -z, y), (z, none, -x), (-y, x, none))
    return np.stack([np.stack(row, axis=-1) for row in rows], axis=-2)


@dataclass(frozen=True)
class CoilBody(Described):
    """A coil; satisfies ``Body``.

    Parameters
    ----------
    spec, layout : BodySpec, CoilLayout
        What the scene asks; helix, grid along the arc and wire.
    key : str
        Content hash.
    temperature_k, gravity_m_s2 : float
        Of the surroundings (thermoelastic loss, cords).
    up : Array
        (3,) unit vector against gravity in the body frame.
    """

    spec: BodySpec
    layout: CoilLayout
    key: str
    temperature_k: float
    gravity_m_s2: float
    up: Array
    family: Literal["line", "skin", "wall"] = "line"

    @property
    def grid(self) -> Grid:
        """Elements along the arc."""
        return self.layout.grid

    @property
    def freedoms(self) -> int:
        """Six for each node."""
        return len(self.grid.nodes_m) * FIELDS

    @property
    def thickness_m(self) -> float:
        """The wire."""
        return self.layout.wire_m

    @property
    def linear_reach_m(self) -> float:
        """Deflection above which the linear energies are not enough."""
        return _BENT * 2.0 * self.layout.helix.radius_m

    @cached_property
    def inertia(self) -> Inertia:
        """Mass properties, integrated with the same points and densities as the kinetic energy."""
        at = self.grid.quadrature()
        arc = at.place_m[..., 0]
        section = self.layout.section
        density = self.spec.material.density_kg_m3
        weight = density * at.weight
        line = weight * float(section.area[0])
        place = self.layout.helix.place(arc)
        mass = float(line.sum())
        centre = np.einsum("eq,eqd->d", line, place) / mass
        arm = place - centre
        spread = np.einsum("eq,eqi,eqj->ij", line, arm, arm)
        tangent = self.layout.helix.frame(arc)[..., 0, :]
        second = float(section.up[0])
        # Rotary inertia of the section: second moment about each diameter, twice that about the tangent.
        own = second * (np.eye(3) * weight.sum() + np.einsum("eq,eqi,eqj->ij", weight, tangent, tangent))
        return Inertia(mass, centre, np.trace(spread) * np.eye(3) - spread + own)

    @cached_property
    def surface(self) -> Surface:
        """Closed display mesh of the wire."""
        return skin(self.layout)

    @cached_property
    def radiator(self) -> Radiator:
        """Slices along the wire."""
        return slices(self.layout)

    def motion(self, points_m: Array) -> csr_matrix:
        """Three displacements and three rotations (6 k, d) of material points (k, 3)."""
        points = np.atleast_2d(points_m)
        helix = self.layout.helix
        arc = helix.nearest(points)
        element, local, _ = self.grid.locate(arc[:, None])
        value, _ = basis(self.grid.order, local)
        value = np.where(np.abs(value) < ROUNDING, 0.0, value)
        tangent = helix.frame(arc)[:, 0]
        arm = points - helix.place(arc)
        arm = arm - np.einsum("pi,pi->p", arm, tangent)[:, None] * tangent
        size = np.linalg.norm(arm, axis=1)
        half = 0.5 * self.layout.wire_m
        arm = arm * np.minimum(1.0, half / np.maximum(size, 1e-300))[:, None]
        gain = np.broadcast_to(np.eye(FIELDS), (len(points), FIELDS, FIELDS)).copy()
        gain[:, :3, 3:] = -_crossing(arm)
        rows_of = np.einsum("paf,pk->pakf", gain, value)
        columns = self.grid.elements[element][:, None, :, None] * FIELDS + np.arange(FIELDS)
        columns = np.broadcast_to(columns, rows_of.shape).ravel()
        rows = np.repeat(np.arange(len(points) * FIELDS), value.shape[1] * FIELDS)
        keep = rows_of.ravel() != 0.0
        shape = (len(points) * FIELDS, self.freedoms)
        return csr_matrix(coo_matrix((rows_of.ravel()[keep], (rows[keep], columns[keep])), shape=shape))

    def probe(self, points_m: Array) -> csr_matrix:
        """Displacement (3 k, d) of the material points nearest to ``points_m`` (k, 3)."""
        count = len(np.atleast_2d(points_m))
        return self.motion(points_m)[(np.arange(count)[:, None] * FIELDS + np.arange(3)).ravel()]

    def turn(self, point_m: Array) -> csr_matrix:
        """Rotation (3, d) of the section nearest to a point (3,)."""
        return self.motion(point_m)[3:]

    def unused(self) -> NDArray[np.int64]:
        """None: a wire moves in every way."""
        return np.zeros(0, dtype=np.int64)

    def select(self, hold: HoldSpec) -> Held:
        """Find the material points of one support."""
        where, helix = hold.where, self.layout.helix
        if isinstance(where, NamedPlace):
            arcs = np.array([0.0 if name == "left" else helix.length_m for name in where.names])
            return Held.of(helix.place(arcs), np.ones(len(arcs)), places=len(arcs))
        nodes = helix.place(self.grid.nodes_m[:, 0])
        if isinstance(where, BoxPlace):
            slack = 1e-9 * helix.length_m
            low, high = np.array(where.low_m) - slack, np.array(where.high_m) + slack
            inside = np.all((nodes >= low) & (nodes <= high), axis=1)
            if not inside.any():
                raise BodyError(
                    what="the box of a support holds no part of the body",
                    where=f"body {self.name!r}",
                    fix=f"the middle of the wire runs round the axis at {helix.radius_m:g} m, "
                    f"from x = 0 to {helix.rise_m * helix.angle:g} m",
                )
            whole = np.asarray(inside[self.grid.elements].all(axis=1), dtype=np.bool_)
            return Held.of(nodes[inside], self.grid.measure(whole)[inside])
        point = np.array([where.point_m])
        near = helix.place(helix.nearest(point))
        miss = float(np.linalg.norm(near - point)) - 0.5 * self.layout.wire_m
        if miss > _REACH * float(np.ptp(nodes, axis=0).max()):
            raise BodyError(
                what=f"a support at {point[0].tolist()} m, {miss:g} m off the body",
                where=f"body {self.name!r}",
                fix="give a point on the wire, in the body's own frame",
            )
        return Held(near, np.ones(1))

    def spot(self, spot: SpotSpec) -> SurfaceSpot:
        """Find a spot on the surface."""
        return coil_spot(self.spec, self.layout, spot, self.inertia.centre_m)

    @cached_property
    def supports(self) -> Supports:
        """Supports over all freedoms."""
        weight = 0.0 if self.spec.floating else self.inertia.mass_kg * self.gravity_m_s2
        return supports(self, self.spec.support, up=self.up, weight_n=weight, centre_m=self.inertia.centre_m, line=True)

    def forms(self) -> Forms:
        """Assemble T and V."""
        at = self.grid.quadrature()
        frame = self.layout.helix.frame(at.place_m[..., 0])
        section, material = self.layout.section, self.spec.material
        area, second = float(section.area[0]), float(section.up[0])
        young, density = material.young_pa[0], material.density_kg_m3
        stout = max(1.0, area * (_THIN * self.layout.helix.length_m) ** 2 / second)
        shear = float(np.sqrt(material.shear_pa[0] * material.shear_pa[1])) * section.shear_up * area / stout
        rigidity = np.array([young * area, shear, shear, float(section.torsion[0]), young * second, young * second])
        strain = np.zeros((*frame.shape[:2], 6, 9))
        strain[..., :3, :3] = frame
        strain[..., :3, 3:6] = frame @ _crossing(frame[..., 0, :])
        strain[..., 3:, 6:] = frame
        stiff = np.einsum("eqka,k,eqkb->eqab", strain, rigidity, strain)
        tangent = frame[..., 0, :]
        heavy = np.zeros((*frame.shape[:2], 6, 6))
        heavy[..., :3, :3] = density * area * np.eye(3)
        heavy[..., 3:, 3:] = density * second * stout * np.eye(3)
        # Twice the second moment about the tangent; what is softened in shear does not slow the twist.
        heavy[..., 3:, 3:] += density * second * (2.0 - stout) * tangent[..., :, None] * tangent[..., None, :]
        stiffness = assemble(self.grid, at, _PARTS, 0.5 * (stiff + np.swapaxes(stiff, -1, -2)))
        mass = assemble(self.grid, at, _MOVE, heavy)
        return reduced(stiffness, mass, self.supports, self._heat(at, frame))

    def _heat(self, at: Quadrature, frame: Array) -> tuple[HeatForm, ...]:
        heat = Heat.of(self.spec.material, self.temperature_k)
        if heat is None:
            return ()
        section = self.layout.section
        strength = heat.per_pascal * self.spec.material.young_pa[0] ** 2 * float(section.up[0])
        slopes = sample(self.grid, at, _TURN_SLOPES, np.ones((*at.weight.shape, 3)))
        # Bending about normal and binormal, as rows over the three slopes of every integration point.
        bends = (np.sqrt(strength * at.weight)[..., None, None] * frame[..., 1:, :]).reshape(-1, 2, 3)
        count = len(bends)
        local = bsr_array((bends, np.arange(count), np.arange(count + 1)), shape=(2 * count, 3 * count))
        relax = np.full(2 * count, float(section.relax_up[0]) / heat.diffusivity_m2_s)
        return (HeatForm(csr_matrix(local @ slopes), relax),)
