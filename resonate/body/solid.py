"""Solid bodies: three-dimensional elasticity.

Fields: motion along x, y and z. Blocks, balls and cylinders stand on mapped hexahedra of high order, solids from a
file on quadratic tetrahedra. There is no
thermoelastic loss here: a solid has no thin direction across which bending could drive heat while it rings.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Literal

import numpy as np
from scipy.sparse import coo_matrix, csr_matrix

from resonate.body.body import Forms, Inertia, Radiator, Surface, SurfaceSpot
from resonate.body.described import Described
from resonate.body.elastic import mass, stiffness, stiffness_law
from resonate.body.reduce import bending_reach_m, reduced
from resonate.body.solid_mesh import mesh_spot
from resonate.body.solid_spot import REACH, solid_spot
from resonate.body.spectral import ROUNDING
from resonate.body.support import Held, Supports, supports
from resonate.errors import BodyError
from resonate.scene.model import BoxPlace, FixHold, NamedPlace, SolidShape

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.elastic import Cells
    from resonate.body.solid_layout import SolidLayout
    from resonate.scene.model import BodySpec, HoldSpec, SpotSpec

    Array = NDArray[np.float64]

_FIELDS = 3


@dataclass(frozen=True)
class SolidBody(Described):
    """A solid; satisfies ``Body``. Parameters as for lines, with a solid layout."""

    spec: BodySpec
    layout: SolidLayout
    key: str
    temperature_k: float
    gravity_m_s2: float
    up: Array

    @property
    def family(self) -> Literal["solid"]:
        """Which group of shapes it belongs to."""
        return "solid"

    @property
    def grid(self) -> Cells:
        """Elements in space."""
        return self.layout.cells

    @property
    def freedoms(self) -> int:
        """Three for each node."""
        return len(self.grid.nodes_m) * _FIELDS

    @property
    def thickness_m(self) -> float:
        """The smallest extent."""
        return float(self.layout.size_m.min())

    @property
    def linear_reach_m(self) -> float:
        """Deflection above which the linear energies are not enough; a share of the smallest extent."""
        return bending_reach_m(self.thickness_m)

    @cached_property
    def inertia(self) -> Inertia:
        """Mass properties, integrated with the same points and density as the kinetic energy."""
        at = self.grid.quadrature()
        weight = self.spec.material.density_kg_m3 * at.weight.ravel()
        place = at.place_m.reshape(-1, 3)
        total = float(weight.sum())
        centre = weight @ place / total
        off = place - centre
        second = (off * weight[:, None]).T @ off
        return Inertia(total, centre, np.trace(second) * np.eye(3) - second)

    @property
    def surface(self) -> Surface:
        """Closed display mesh."""
        return self.layout.skin.surface

    @cached_property
    def radiator(self) -> Radiator:
        """Points of the whole surface with their areas."""
        skin = self.layout.skin
        weights = np.zeros_like(skin.points_m)
        weights[:, 0] = skin.area_m2
        return Radiator("closed", skin.points_m, skin.normals, weights)

    def probe(self, points_m: Array) -> csr_matrix:
        """Displacement (3 k, d) of the material points nearest to ``points_m`` (k, 3)."""
        points = np.atleast_2d(points_m)
        element, local, _ = self.grid.locate(points)
        value = self.grid.value(local)
        value = np.where(np.abs(value) < ROUNDING, 0.0, value)
        nodes = self.grid.elements[element]
        count, width = value.shape
        axis = np.arange(_FIELDS)[None, :, None]
        shape = (count, _FIELDS, width)
        rows = np.broadcast_to(np.arange(count)[:, None, None] * _FIELDS + axis, shape).ravel()
        columns = (nodes[:, None, :] * _FIELDS + axis).ravel()
        entries = np.broadcast_to(value[:, None, :], shape).ravel()
        keep = entries != 0.0
        size = (count * _FIELDS, self.freedoms)
        return csr_matrix(coo_matrix((entries[keep], (rows[keep], columns[keep])), shape=size))

    def motion(self, points_m: Array) -> csr_matrix:
        """Three displacements and three rotations (6 k, d) of points (k, 3).

        A point of a solid has no rotation of its own to be held: those rows are empty.
        """
        moves = self.probe(points_m).tocoo()
        count = len(np.atleast_2d(points_m))
        rows = moves.row // _FIELDS * 6 + moves.row % _FIELDS
        return csr_matrix(coo_matrix((moves.data, (rows, moves.col)), shape=(6 * count, self.freedoms)))

    def turn(self, point_m: Array) -> csr_matrix:  # noqa: ARG002 (the body turns as a whole)
        """Rotation (3, d) of the whole: the turn that best fits the motion of eight far corners."""
        ways = np.stack(np.meshgrid(*[[-1.0, 1.0]] * 3, indexing="ij"), axis=-1).reshape(-1, 3)
        nodes = self.grid.nodes_m
        far = nodes[np.unique([int(np.argmax(nodes @ way)) for way in ways])]
        arms = far - far.mean(axis=0)
        second = np.sum(arms**2) * np.eye(3) - arms.T @ arms
        cross = np.zeros((3, len(arms), 3))
        for axis in range(3):
            cross[axis] = np.cross(np.eye(3)[axis], arms)
        return csr_matrix(np.linalg.inv(second) @ cross.reshape(3, -1)) @ self.probe(far)

    def unused(self) -> NDArray[np.int64]:
        """Every freedom moves."""
        return np.zeros(0, dtype=np.int64)

    def select(self, hold: HoldSpec) -> Held:
        """Find the material points of one support."""
        if isinstance(hold.hold, FixHold) and not set(hold.hold.axes) & {"x", "y", "z"}:
            raise BodyError(
                what=f"a support of a solid that holds only the turns {list(hold.hold.axes)}",
                where=f"body {self.name!r}",
                fix='hold displacements of a face or a box ("x", "y", "z"): they hold its turns as well',
            )
        where, nodes, skin = hold.where, self.grid.nodes_m, self.layout.skin
        if isinstance(where, NamedPlace):
            chosen = [skin.nodes[name] for name in where.names]
            return Held.of(
                nodes[np.concatenate([numbers for numbers, _, _ in chosen])],
                np.concatenate([area for _, _, area in chosen]),
                outward=np.concatenate([normal for _, normal, _ in chosen]),
                places=len(where.names),
            )
        numbers, normal, _ = skin.nodes["surface"]
        if isinstance(where, BoxPlace):
            slack = 1e-9 * float(self.layout.size_m.max())
            low, high = np.array(where.low_m) - slack, np.array(where.high_m) + slack
            inside = np.flatnonzero(np.all((nodes >= low) & (nodes <= high), axis=1))
            if len(inside) == 0:
                raise BodyError(
                    what="the box of a support holds no point of the mesh",
                    where=f"body {self.name!r}",
                    fix="make the box larger, or support a point",
                )
            outward, volume = np.zeros_like(nodes), self.grid.measure()
            outward[numbers] = normal
            return Held.of(nodes[inside], volume[inside], outward=outward[inside])
        point = np.array(where.point_m)
        element, local, miss = self.grid.locate(point[None])
        if float(miss[0]) > REACH * float(self.layout.size_m.max()):
            raise BodyError(
                what=f"a support at {point.tolist()} m, {float(miss[0]):g} m off the body",
                where=f"body {self.name!r}",
                fix="give a point on the body, in its own frame",
            )
        near = int(np.argmin(np.linalg.norm(nodes[numbers] - point, axis=1)))
        place = self.grid.value(local)[0] @ nodes[self.grid.elements[element[0]]]
        return Held.of(place[None], np.ones(1), outward=normal[near][None])

    def spot(self, spot: SpotSpec) -> SurfaceSpot:
        """Find a spot on the surface."""
        spread = self.layout.spread_m
        if isinstance(self.spec.shape, SolidShape):
            return mesh_spot(self.spec, spot, spread_m=spread, size_m=self.layout.size_m)
        return solid_spot(self.spec, spot, spread_m=spread)

    @cached_property
    def supports(self) -> Supports:
        """Supports over all freedoms."""
        weight = 0.0 if self.spec.floating else self.inertia.mass_kg * self.gravity_m_s2
        centre = self.inertia.centre_m
        return supports(
            self, self.spec.support, up=self.up, weight_n=weight, centre_m=centre, line=False, solid=True
        )

    def forms(self) -> Forms:
        """Assemble T and V."""
        at = self.grid.quadrature()
        elastic = stiffness(self.grid, at, stiffness_law(self.spec.material))
        return reduced(elastic, mass(self.grid, at, self.spec.material.density_kg_m3), self.supports, ())
