"""Vessels: shells of revolution round y, solved harmonic by harmonic.

Freedoms are grouped by harmonic: for every number n of waves round the axis one group that varies as cos(n theta)
and one turned by a quarter wave, each over the same nodes along the meridian. Nothing couples the groups unless a
support or a lug does, so that pairs of modes are exactly equal on a perfect vessel and split on a real one.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property
from typing import TYPE_CHECKING, Literal

import numpy as np
from scipy.sparse import block_diag, coo_matrix, csr_matrix, diags, hstack

from resonate.body.body import Forms, HeatForm, Inertia, Radiator, Surface, SurfaceSpot
from resonate.body.described import Described
from resonate.body.heat import Heat
from resonate.body.meridian import course
from resonate.body.reduce import bending_reach_m, reduced
from resonate.body.revolution import harmonic_forms, heating, integrated, pole_rows
from resonate.body.spectral import ROUNDING, lagrange, lobatto, lobatto_weights
from resonate.body.support import Held, Supports, supports
from resonate.body.vessel_layout import FIELDS, ORDER, harmonics_for
from resonate.body.vessel_skin import display, patches
from resonate.body.vessel_spot import check_reach, rim_first, share_of, vessel_spot
from resonate.errors import BodyError
from resonate.scene.model import BoxPlace, FixHold, NamedHold, NamedPlace, VesselShape

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.vessel_layout import VesselLayout
    from resonate.scene.model import BodySpec, HoldSpec, SpotSpec

    Array = NDArray[np.float64]

# Fields that vary as cos(n theta); the others vary as sin(n theta).
_EVEN = (0, 1, 3)
_ODD = (2, 4)
# Nearer than this share of an element to a node is on it: one node moves the point, and not nine.
_SNAP = 1e-5
# Sums round the axis leave this much, by share, where they cancel.
_CANCELS = 1e-12


@dataclass(frozen=True)
class VesselBody(Described):
    """A vessel; satisfies ``Body``. Parameters as for lines, with a vessel's layout."""

    spec: BodySpec
    layout: VesselLayout
    key: str
    temperature_k: float
    gravity_m_s2: float
    up: Array
    family: Literal["line", "skin", "wall"] = "wall"

    @property
    def shape(self) -> VesselShape:
        """Profile, wall and lugs."""
        assert isinstance(self.spec.shape, VesselShape)  # noqa: S101 (the caller sorts the kinds)
        return self.spec.shape

    @property
    def copies(self) -> int:
        """Groups of freedoms: two for every harmonic."""
        return 2 * (self.layout.harmonics + 1)

    @property
    def freedoms(self) -> int:
        """Those of one harmonic for each group."""
        return self.copies * self.layout.freedoms

    @property
    def thickness_m(self) -> float:
        """The thinnest wall."""
        return float(self.layout.nodes.wall_m.min())

    @property
    def linear_reach_m(self) -> float:
        """Deflection above which the linear energies are not enough."""
        return bending_reach_m(self.thickness_m)

    @cached_property
    def inertia(self) -> Inertia:
        """Mass properties, integrated with the same points and densities as the kinetic energy."""
        at = integrated(self.layout)
        weight = 2.0 * np.pi * self.spec.material.density_kg_m3 * at.volume.ravel()
        radius, height = at.place_m.reshape(-1, 2).T
        lugs = np.array([lug.mass_kg for lug in self.shape.lugs])
        places = self._lug_points()
        mass = float(weight.sum() + lugs.sum())
        centre = (np.array([0.0, float(weight @ height), 0.0]) + lugs @ places) / mass
        swing = float(weight @ (0.5 * radius**2 + height**2))
        own = np.diag([swing, float(weight @ radius**2), swing])
        own += np.einsum("l,lij->ij", lugs, _about(places))
        tensor = own - mass * _about(centre[None])[0]
        return Inertia(mass, centre, tensor)

    def _lug_points(self) -> Array:
        points = []
        for lug in self.shape.lugs:
            which, p = share_of(self.layout.pieces, lug.at[0])
            radius, height = self.layout.pieces[which].curve(np.array([p]), 0)[0]
            turn = 2.0 * np.pi * lug.at[1]
            points.append([radius * np.cos(turn), height, radius * np.sin(turn)])
        return np.array(points).reshape(-1, 3)

    @cached_property
    def surface(self) -> Surface:
        """Closed display mesh."""
        return display(self.layout)

    @cached_property
    def radiator(self) -> Radiator:
        """Patches of the outside with their areas."""
        heard = harmonics_for(self.spec, self.layout.rigidity, self.layout.nodes, self.bands.heard_hz)
        return patches(self.layout, around=2 * min(heard, self.layout.harmonics) + 2)

    def locate(self, flat: Array) -> tuple[NDArray[np.int64], Array, Array]:
        """Element (k,), place along it and across the wall, both in [-1, 1], nearest to points (k, 2)."""
        layout = self.layout
        place = layout.per_node(layout.nodes.place_m)
        looks = np.linspace(-1.0, 1.0, 4 * ORDER + 1)
        sampled = np.einsum("qk,ekd->eqd", lagrange(ORDER, looks)[0], place).reshape(-1, 2)
        nearest = np.empty(len(flat), dtype=np.int64)
        for begin in range(0, len(flat), 512):
            part = flat[begin : begin + 512, None] - sampled
            nearest[begin : begin + 512] = np.argmin(np.einsum("pqd,pqd->pq", part, part), axis=1)
        element, local = nearest // len(looks), looks[nearest % len(looks)]
        corners = place[element]
        for _ in range(8):
            value, slope = lagrange(ORDER, local)
            miss = np.einsum("pk,pkd->pd", value, corners) - flat
            tangent = np.einsum("pk,pkd->pd", slope, corners)
            step = np.einsum("pd,pd->p", miss, tangent) / np.einsum("pd,pd->p", tangent, tangent)
            local = np.clip(local - step, -1.0, 1.0)
        ends = lobatto(ORDER)
        near = ends[np.argmin(np.abs(local[:, None] - ends), axis=1)]
        local = np.where(np.abs(local - near) < _SNAP, near, local)
        value, _ = lagrange(ORDER, local)
        fibre = layout.per_node(0.5 * layout.nodes.wall_m[:, None] * layout.nodes.outward)[element]
        lean = np.einsum("pk,pkd->pd", value, fibre)
        miss = flat - np.einsum("pk,pkd->pd", value, corners)
        across = np.einsum("pd,pd->p", miss, lean) / np.einsum("pd,pd->p", lean, lean)
        return element, local, np.clip(across, -1.0, 1.0)

    def motion(self, points_m: Array) -> csr_matrix:
        """Three displacements and three rotations (6 k, d) of material points (k, 3)."""
        points = np.atleast_2d(points_m)
        theta = np.arctan2(points[:, 2], points[:, 0])
        flat = np.stack((np.hypot(points[:, 0], points[:, 2]), points[:, 1]), axis=1)
        element, local, across = self.locate(flat)
        value, _ = lagrange(ORDER, local)
        value = np.where(np.abs(value) < ROUNDING, 0.0, value)
        nodes = self.layout.nodes
        half, tangent = (self.layout.per_node(what)[element] for what in (0.5 * nodes.wall_m, nodes.along))
        outward = np.stack((np.cos(theta), np.zeros_like(theta), np.sin(theta)), axis=1)
        round_it = np.stack((-np.sin(theta), np.zeros_like(theta), np.cos(theta)), axis=1)
        upward = np.broadcast_to([0.0, 1.0, 0.0], outward.shape)
        lengthwise = tangent[..., :1] * outward[:, None] + tangent[..., 1:] * upward[:, None]
        gain = np.zeros((len(points), ORDER + 1, 6, FIELDS))
        for field, direction in enumerate((outward, upward, round_it)):
            gain[:, :, :3, field] = direction[:, None]
        lift = (across[:, None] * half)[..., None]
        gain[:, :, :3, 3], gain[:, :, 3:, 3] = lift * lengthwise, round_it[:, None]
        gain[:, :, :3, 4], gain[:, :, 3:, 4] = lift * round_it[:, None], -lengthwise
        gain *= value[:, :, None, None]
        number = self.layout.number[element]
        even, odd = (self._rows(gain[..., fields], number[..., fields]) for fields in (_EVEN, _ODD))
        groups: list[csr_matrix] = []
        for n in range(self.layout.harmonics + 1):
            cosine, sine = (diags(np.repeat(wave, 6)) for wave in (np.cos(n * theta), np.sin(n * theta)))
            groups.extend((cosine @ even + sine @ odd, sine @ even - cosine @ odd))
        return csr_matrix(hstack(groups, format="csr"))

    def _rows(self, gain: Array, number: NDArray[np.int64]) -> csr_matrix:
        # gain (p, k, 6, f) for freedoms number (p, k, f).
        columns = np.broadcast_to(number[:, :, None, :], gain.shape).ravel()
        rows = np.broadcast_to(np.arange(len(gain) * 6).reshape(-1, 1, 6, 1), gain.shape).ravel()
        keep = gain.ravel() != 0.0
        shape = (len(gain) * 6, self.layout.freedoms)
        return csr_matrix(coo_matrix((gain.ravel()[keep], (rows[keep], columns[keep])), shape=shape))

    def probe(self, points_m: Array) -> csr_matrix:
        """Displacement (3 k, d) of the material points nearest to ``points_m`` (k, 3)."""
        count = len(np.atleast_2d(points_m))
        return self.motion(points_m)[(np.arange(count)[:, None] * 6 + np.arange(3)).ravel()]

    def turn(self, point_m: Array) -> csr_matrix:
        """Rotation (3, d) of the whole wall about a point (3,) on the axis, in the mean."""
        layout, size = self.layout, self.layout.freedoms
        place, weight = layout.per_node(layout.nodes.place_m), np.tile(lobatto_weights(ORDER), layout.elements)
        radius, height = place[..., 0], place[..., 1] - point_m[1]
        weight = weight.reshape(radius.shape) * np.ptp(layout.arc_m, axis=1)[:, None] * radius
        swing, spin = np.zeros(size), np.zeros(size)
        for field, arm in enumerate((-height, radius, height)):
            np.add.at(swing, layout.number[..., field], np.pi * weight * arm)
        np.add.at(spin, layout.number[..., 2], 2.0 * np.pi * weight * radius)
        swing /= 2.0 * np.pi * float(np.sum(weight * (0.5 * radius**2 + height**2)))
        spin /= 2.0 * np.pi * float(np.sum(weight * radius**2))
        rows = np.zeros((3, self.freedoms))
        rows[0, 3 * size : 4 * size], rows[1, size : 2 * size], rows[2, 2 * size : 3 * size] = -swing, spin, swing
        return csr_matrix(rows)

    def unused(self) -> NDArray[np.int64]:
        """Of n = 0, one group stretches and bends, the other twists."""
        number = self.layout.number
        return np.concatenate(
            (np.unique(number[..., _ODD]), self.layout.freedoms + np.unique(number[..., _EVEN]))
        )

    @cached_property
    def _around(self) -> Array:
        # Enough points round a circle to tell all harmonics apart.
        count = 2 * self.layout.harmonics + 3
        return 2.0 * np.pi * np.arange(count) / count

    def _circle(self, place: Array) -> Array:
        if place[0] <= 1e-12 * float(np.abs(self.layout.nodes.place_m).max()):
            return np.array([[0.0, place[1], 0.0]])
        turn = self._around
        return np.stack(
            (place[0] * np.cos(turn), np.full(len(turn), place[1]), place[0] * np.sin(turn)), axis=1
        )

    def select(self, hold: HoldSpec) -> Held:
        """Find the material points of one support."""
        where, layout, pieces = hold.where, self.layout, self.layout.pieces
        if isinstance(where, NamedPlace):
            rings, outward = [], []
            for name in where.names:
                first = rim_first(pieces) == (name == "rim")
                piece = pieces[0 if first else -1]
                at = course(piece, np.array([0.0 if first else piece.end]))
                ring = self._circle(at.place_m[0])
                if len(ring) == 1 and _stops_turning(hold):
                    # A stem as thick as the wall: a single point of a shell holds no turn about the axis.
                    ring = np.concatenate((ring, self._circle(layout.stem(first=first))))
                out = (-1.0 if first else 1.0) * at.along[0]
                turn = np.arctan2(ring[:, 2], ring[:, 0])
                rings.append(ring)
                outward.append(
                    np.stack((out[0] * np.cos(turn), np.full(len(turn), out[1]), out[0] * np.sin(turn)), axis=1)
                    * (np.hypot(ring[:, 0], ring[:, 2]) > 0.0)[:, None]
                )
            share = np.concatenate([np.full(len(ring), 1.0 / len(ring)) for ring in rings])
            return Held.of(np.concatenate(rings), share, outward=np.concatenate(outward), places=len(rings))
        if isinstance(where, BoxPlace):
            return self._box(np.array(where.low_m), np.array(where.high_m))
        point = np.array(where.point_m)
        flat = np.array([[np.hypot(point[0], point[2]), point[1]]])
        element, local, across = self.locate(flat)
        value, _ = lagrange(ORDER, local)
        nodes = layout.nodes
        there = layout.per_node(
            nodes.place_m + float(across[0]) * 0.5 * nodes.wall_m[:, None] * nodes.outward
        )[element[0]]
        check_reach(self.spec, pieces, point, float(np.linalg.norm(value[0] @ there - flat[0])))
        return Held.of(point[None], np.ones(1))

    def _box(self, low: Array, high: Array) -> Held:
        layout = self.layout
        last = np.concatenate((np.tile(np.arange(ORDER + 1) < ORDER, layout.elements)[:-1], [True]))
        weights = np.tile(lobatto_weights(ORDER), layout.elements)
        places = [self._circle(place) for place in layout.nodes.place_m[last]]
        points = np.concatenate(places)
        # Inner nodes of an element stand for the area round them.
        sizes = np.concatenate(
            [np.full(len(ring), weight) for ring, weight in zip(places, weights[last], strict=True)]
        )
        sizes = sizes * np.hypot(points[:, 0], points[:, 2])
        slack = 1e-9 * float(np.ptp(points, axis=0).max())
        inside = np.all((points >= low - slack) & (points <= high + slack), axis=1)
        if not np.any(inside):
            raise BodyError(
                what="the box of a support holds no point of the mesh",
                where=f"body {self.name!r}",
                fix="make the box larger, or support a point",
            )
        return Held.of(points[inside], sizes[inside])

    def spot(self, spot: SpotSpec) -> SurfaceSpot:
        """Find a spot on the surface."""
        return vessel_spot(self.spec, self.layout.pieces, spot, self.inertia.centre_m)

    @cached_property
    def supports(self) -> Supports:
        """Supports over all freedoms."""
        weight = 0.0 if self.spec.floating else self.inertia.mass_kg * self.gravity_m_s2
        rows = [pole_rows(self.layout, n) for n in range(self.layout.harmonics + 1)]
        tied = csr_matrix(block_diag([part for part in rows for _ in range(2)]))
        held = supports(
            self,
            self.spec.support,
            up=self.up,
            weight_n=weight,
            centre_m=self.inertia.centre_m,
            line=False,
            tied=tied,
        )
        return replace(held, springs=_clean(held.springs), cords=_clean(held.cords))

    def forms(self) -> Forms:
        """Assemble T and V."""
        one = harmonic_forms(self.layout, self.spec.material)
        stiff, heavy = [], []
        for n in range(self.layout.harmonics + 1):
            turn = _angle(n)
            stiff.extend([turn * one.stiffness(n)] * 2)
            heavy.extend([turn * one.mass] * 2)
        mass = csr_matrix(block_diag(heavy, format="csr"))
        if self.shape.lugs:
            rows = self.probe(self._lug_points())
            lugs = diags(np.repeat([lug.mass_kg for lug in self.shape.lugs], 3))
            mass = csr_matrix(mass + rows.T @ lugs @ rows)
        return reduced(csr_matrix(block_diag(stiff, format="csr")), mass, self.supports, self._heat())

    def _heat(self) -> tuple[HeatForm, ...]:
        heat = Heat.of(self.spec.material, self.temperature_k)
        if heat is None:
            return ()
        one = heating(self.layout, heat.per_pascal)
        rows = []
        for n in range(self.layout.harmonics + 1):
            rows.extend([np.sqrt(_angle(n)) * (one.plain + n * one.turned)] * 2)
        relax = one.wall_m**2 / (np.pi**2 * heat.diffusivity_m2_s)
        return (HeatForm(csr_matrix(block_diag(rows, format="csr")), np.tile(relax, self.copies)),)


def _stops_turning(hold: HoldSpec) -> bool:
    kind = hold.hold
    if isinstance(kind, NamedHold):
        return kind.kind in ("clamped", "guided")
    return isinstance(kind, FixHold) and "ry" in kind.axes


def _angle(n: int) -> float:
    """Integral of cos^2 or sin^2 of n theta round the axis."""
    return 2.0 * np.pi if n == 0 else np.pi


def _about(points: Array) -> Array:
    """Inertia tensors (k, 3, 3) of unit masses about the origin."""
    square = np.einsum("ki,ki->k", points, points)
    return np.asarray(square[:, None, None] * np.eye(3) - points[:, :, None] * points[:, None, :])


def _clean(matrix: csr_matrix | None) -> csr_matrix | None:
    """Drop what a sum round the axis leaves where harmonics cancel."""
    if matrix is None:
        return None
    kept = csr_matrix(matrix, copy=True)
    kept.data[np.abs(kept.data) < _CANCELS * float(np.abs(kept.data).max(initial=0.0))] = 0.0
    kept.eliminate_zeros()
    return kept
