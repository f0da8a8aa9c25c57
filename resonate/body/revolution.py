"""Energies of a shell of revolution, one harmonic round the axis at a time.

The wall is a thin solid whose straight fibres stay straight: five fields a node (three displacements, two turns of
the fibre), exact strains of the solid in cylindrical coordinates, no stress across the wall, shear with 5/6. The
displacement varies as cos(n theta) (radius, height, turn towards the meridian) and sin(n theta) (round the axis);
along the meridian it is a polynomial of high order through Gauss-Lobatto points, which neither locks nor drifts.

References
----------
Ahmad, Irons & Zienkiewicz, Analysis of thick and thin shell structures by curved finite elements, Int. J. Numer.
Meth. Eng. 2 (1970) 419 (the degenerated solid). Naghdi, in Handbuch der Physik VIa/2 (1972) (the theory).
Grafton & Strome, AIAA J. 1 (1963) 2342 (harmonics round the axis). Hakula, Leino & Pitkaranta, Comput. Methods
Appl. Mech. Eng. 133 (1996) 157 (high order against locking).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.sparse import coo_matrix, csr_matrix

from resonate.body.flat_layout import SHEAR
from resonate.body.spectral import gauss, lagrange
from resonate.body.vessel_layout import FIELDS, KINK, ORDER, VesselLayout

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.scene.model import MaterialSpec

    Array = NDArray[np.float64]

_ALONG = ORDER + 3
_ACROSS = 4
# Stiffness of a hinge at a kink, in shear modulus times wall^2: as a strip of a hundredth of the wall would twist.
_HINGE = 8.0


@dataclass(frozen=True)
class Solid:
    """The wall at points (e, q, z): q along an element, z across from inside (-1) to outside (+1).

    ``place_m`` (e, q, z, 2); ``volume`` (e, q, z) weights of an integral over radius and height;
    ``moved`` (e, q, z, 3, 5 k): motion outward, up and round by unit freedoms; ``strain`` (e, q, z, 5, 5 k) for
    n = 0 and ``turned`` its rate with n: along, round, shear of these two, and the two shears across the wall.
    """

    place_m: Array
    volume: Array
    moved: Array
    strain: Array
    turned: Array


def solid(layout: VesselLayout, along: Array, weight: Array, across: Array, thick_weight: Array) -> Solid:
    """Look into the wall at local points ``along`` (q,) and ``across`` (z,) of every element."""
    value, slope = lagrange(ORDER, along)
    nodes = layout.nodes
    place, out, tangent, half = (
        layout.per_node(part) for part in (nodes.place_m, nodes.outward, nodes.along, 0.5 * nodes.wall_m)
    )
    fibre = half[..., None] * out
    z = across[None, None, :, None]
    middle, middle_slope, lean, lean_slope = (
        np.einsum("qk,ekd->eqd", gain, what)[:, :, None, :]
        for gain, what in ((value, place), (slope, place), (value, fibre), (slope, fibre))
    )
    point = middle + z * lean
    first = middle_slope + z * lean_slope
    speed = np.linalg.norm(first, axis=3)
    lengthwise = first / speed[..., None]
    normal = np.stack((lengthwise[..., 1], -lengthwise[..., 0]), axis=3)
    through = np.broadcast_to(lean, point.shape)
    height = np.einsum("eqzd,eqzd->eqz", through, normal)
    slant = np.einsum("eqzd,eqzd->eqz", through, lengthwise)

    e, q, count = len(place), len(along), len(across)
    moved = np.zeros((e, q, count, 3, ORDER + 1, FIELDS))
    by_xi, by_z = np.zeros_like(moved), np.zeros_like(moved)
    for axis in range(3):
        moved[..., axis, :, axis] = value[None, :, None, :]
        by_xi[..., axis, :, axis] = slope[None, :, None, :]
    turn = np.zeros((e, ORDER + 1, 3, FIELDS))
    turn[:, :, :2, 3] = half[..., None] * tangent
    turn[:, :, 2, 4] = half
    swing, swing_slope = (
        np.einsum("qk,ekaf->eqakf", gain, turn)[:, :, None] for gain in (value, slope)
    )
    moved += across[None, None, :, None, None, None] * swing
    by_xi += across[None, None, :, None, None, None] * swing_slope
    by_z += np.broadcast_to(swing, by_z.shape)

    shape = (e, q, count, 3, (ORDER + 1) * FIELDS)
    moved, by_xi, by_z = moved.reshape(shape), by_xi.reshape(shape), by_z.reshape(shape)
    stretched = by_xi / speed[..., None, None]
    across_wall = (by_z - slant[..., None, None] * stretched) / height[..., None, None]
    radius = point[..., 0, None]

    def dot(direction: Array, what: Array) -> Array:
        return direction[..., 0, None] * what[..., 0, :] + direction[..., 1, None] * what[..., 1, :]

    round_move = moved[..., 2, :]
    strain = np.stack(
        (
            dot(lengthwise, stretched),
            moved[..., 0, :] / radius,
            stretched[..., 2, :] - lengthwise[..., 0, None] * round_move / radius,
            dot(lengthwise, across_wall) + dot(normal, stretched),
            across_wall[..., 2, :] - normal[..., 0, None] * round_move / radius,
        ),
        axis=3,
    )
    turned = np.stack(
        (
            np.zeros_like(round_move),
            round_move / radius,
            -dot(lengthwise, moved) / radius,
            np.zeros_like(round_move),
            -dot(normal, moved) / radius,
        ),
        axis=3,
    )
    volume = speed * height * point[..., 0] * weight[None, :, None] * thick_weight
    return Solid(point, volume, moved, strain, turned)


def integrated(layout: VesselLayout) -> Solid:
    """Look at the points of the integrals."""
    along, weight = gauss(_ALONG)
    across, thick_weight = gauss(_ACROSS)
    return solid(layout, along, weight, across, thick_weight)


@dataclass(frozen=True)
class Harmonic:
    """Forms (f, f) per radian round the axis: stiffness ``plain + n mixed + n^2 round`` and ``mass``."""

    plain: csr_matrix
    mixed: csr_matrix
    round: csr_matrix
    mass: csr_matrix

    def stiffness(self, n: int) -> csr_matrix:
        """Stiffness of harmonic n."""
        return csr_matrix(self.plain + n * self.mixed + n**2 * self.round)


def _gather(layout: VesselLayout, blocks: Array) -> csr_matrix:
    blocks = 0.5 * (blocks + blocks.transpose(0, 2, 1))
    number = layout.number.reshape(layout.elements, -1)
    rows = np.broadcast_to(number[:, :, None], blocks.shape).ravel()
    columns = np.broadcast_to(number[:, None, :], blocks.shape).ravel()
    keep = blocks.ravel() != 0.0
    entries = (blocks.ravel()[keep], (rows[keep], columns[keep]))
    return csr_matrix(coo_matrix(entries, shape=(layout.freedoms, layout.freedoms)))


def harmonic_forms(layout: VesselLayout, material: MaterialSpec) -> Harmonic:
    """Assemble the second derivatives of V and T for every harmonic at once."""
    at = integrated(layout)
    law = np.zeros((5, 5))
    law[:3, :3] = layout.rigidity
    # Direction 1 runs along the meridian, 2 round the axis, 3 through the wall.
    law[3, 3], law[4, 4] = SHEAR * material.shear_pa[1], SHEAR * material.shear_pa[2]
    size = at.strain.shape[-1]

    def product(left: Array, right: Array) -> Array:
        weighted = (right * at.volume[..., None, None]).reshape(layout.elements, -1, size)
        return np.asarray(left.reshape(layout.elements, -1, size).transpose(0, 2, 1) @ weighted)

    kinks = _kinks(layout)
    stress, stress_turned = law @ at.strain, law @ at.turned
    mixed = product(at.strain, stress_turned)
    return Harmonic(
        plain=_gather(layout, product(at.strain, stress)) + kinks.plain.T @ kinks.plain,
        mixed=_gather(layout, mixed + mixed.transpose(0, 2, 1))
        + kinks.plain.T @ kinks.turned
        + kinks.turned.T @ kinks.plain,
        round=_gather(layout, product(at.turned, stress_turned)) + kinks.turned.T @ kinks.turned,
        mass=_gather(layout, material.density_kg_m3 * product(at.moved, at.moved)),
    )


@dataclass(frozen=True)
class _Kinks:
    # Rows (c, f) whose square is twice an energy per radian: plain + n turned.
    plain: csr_matrix
    turned: csr_matrix


def _kinks(layout: VesselLayout) -> _Kinks:
    """Stiff hinges that pass the twisting moment on at a slight kink of the wall.

    The turn of the matter at the kink has a part along either tangent, which is the turn of that side's fibres, and
    one along the normal, which is the mean turn of both sides in their own planes: the two turns of the fibres
    differ by the share of it that the angle brings in. Without this a wall of many facets would have no stiffness
    against twist.
    """
    nodes = layout.nodes
    place, along, outward, wall = (
        layout.per_node(part) for part in (nodes.place_m, nodes.along, nodes.outward, nodes.wall_m)
    )
    rows: list[tuple[Array, Array]] = []
    for e in range(1, layout.elements):
        one, other = layout.number[e - 1, -1, 4], layout.number[e, 0, 4]
        if one == other or float(along[e - 1, -1] @ along[e, 0]) < KINK:
            continue
        both = outward[e - 1, -1] + outward[e, 0]
        share = float((along[e, 0] - along[e - 1, -1]) @ both) / float(both @ both)
        radius, thick = float(place[e, 0, 0]), float(min(wall[e - 1, -1], wall[e, 0]))
        stiff = np.sqrt(_HINGE * layout.rigidity[2, 2] * thick**2 * radius)
        plain, turned = np.zeros(layout.freedoms), np.zeros(layout.freedoms)
        plain[other], plain[one] = stiff, -stiff
        for side, end, local in ((e - 1, -1, 1.0), (e, 0, -1.0)):
            _, slope = lagrange(ORDER, np.array([local]))
            speed = float(np.linalg.norm(slope[0] @ place[side]))
            # Half of v' - (-t_r v - n t.u)/r.
            gain = 0.5 * stiff * share
            number = layout.number[side]
            np.add.at(plain, number[:, 2], gain * slope[0] / speed)
            plain[number[end, 2]] += gain * along[side, end, 0] / radius
            for axis in range(2):
                turned[number[end, axis]] += gain * along[side, end, axis] / radius
        rows.append((plain, turned))
    if not rows:
        empty = csr_matrix((0, layout.freedoms))
        return _Kinks(empty, empty)
    return _Kinks(csr_matrix(np.array([row[0] for row in rows])), csr_matrix(np.array([row[1] for row in rows])))


@dataclass(frozen=True)
class Heating:
    """Rows (e q, f) of what heats: ``plain + n turned``; ``wall_m`` (e q,) at each."""

    plain: csr_matrix
    turned: csr_matrix
    wall_m: Array


def heating(layout: VesselLayout, per_pascal: float) -> Heating:
    """Differences of the bending stresses across the wall, squared as relaxation strength times energy.

    As for plates: the sum of both bending stresses heats (Chaigne & Lambourg, JASA 109 (2001) 1422).
    """
    along, weight = gauss(ORDER + 1)
    at = solid(layout, along, weight, np.array([-1.0, 1.0]), np.ones(2))
    value, _ = lagrange(ORDER, along)
    wall = np.einsum("qk,ek->eq", value, layout.per_node(layout.nodes.wall_m))
    plane = layout.rigidity
    gains = np.array([plane[0, 0] + plane[0, 1], plane[1, 1] + plane[0, 1]])
    # Half the volume of both faces together is the area times half the wall.
    area = at.volume.sum(axis=2) / wall
    scale = np.sqrt(per_pascal * wall**3 / 12.0 * area) / wall
    rows = []
    for part in (at.strain, at.turned):
        bent = np.einsum("a,eqas->eqs", gains, part[:, :, 1, :2] - part[:, :, 0, :2])
        rows.append(scale[..., None] * bent)
    return Heating(_rows(layout, rows[0]), _rows(layout, rows[1]), wall.ravel())


def _rows(layout: VesselLayout, local: Array) -> csr_matrix:
    elements, points, width = local.shape
    columns = np.broadcast_to(layout.number.reshape(elements, 1, -1), local.shape).ravel()
    rows = np.repeat(np.arange(elements * points), width)
    keep = local.ravel() != 0.0
    shape = (elements * points, layout.freedoms)
    return csr_matrix(coo_matrix((local.ravel()[keep], (rows[keep], columns[keep])), shape=shape))


def pole_rows(layout: VesselLayout, n: int) -> csr_matrix:
    """Conditions (c, f) on the axis: what the strains divide by the radius must vanish there with it.

    Single-valued motion: n = 0 moves along the axis (and turns about it by nothing), n = 1 moves and turns
    across it as one, higher harmonics not at all.
    """
    rows = []
    for end, shut in zip(((0, 0), (-1, -1)), layout.closed, strict=True):
        if not shut:
            continue
        number = layout.number[end]
        side = float(np.sign(layout.per_node(layout.nodes.along)[end][0]))
        if n == 0:
            fixed = [{0: 1.0}, {2: 1.0}, {3: 1.0}, {4: 1.0}]
        elif n == 1:
            fixed = [{1: 1.0}, {0: 1.0, 2: 1.0}, {3: side, 4: 1.0}]
        else:
            fixed = [{field: 1.0} for field in range(FIELDS)]
        for row in fixed:
            line = np.zeros(layout.freedoms)
            for field, gain in row.items():
                line[number[field]] = gain
            rows.append(line)
    return csr_matrix(np.array(rows)) if rows else csr_matrix((0, layout.freedoms))
