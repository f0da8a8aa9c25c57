"""Where the elements of a block, a ball or a cylinder lie."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from resonate.body.solid_grid import ball_grid, block_grid, cylinder_grid
from resonate.body.solid_skin import Skin, hex_skin
from resonate.body.waves import bending_wavenumber, top_frequency
from resonate.scene.model import BallShape, BlockShape, CylinderShape

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from resonate.body.elastic import Cells
    from resonate.body.spectral import Grid
    from resonate.scene.model import BodySpec, MaterialSpec

    Array = NDArray[np.float64]
    Shape = BlockShape | BallShape | CylinderShape

ORDERS = (6, 5, 4)
# Nodes for each of the shortest waves, and at least so many intervals over any extent.
_NODES_PER_WAVE = 4.4
_LEAST = 6.0
# Side of the core of a round section as a share of its diameter.
_ACROSS = 0.62
# Largest number of nodes; a mesh is never made more than so much coarser for its sake.
BUDGET = 5000
_COARSEST = 200.0
_MARGIN = 1.1
# Shear of a solid section: between 5/6 and 0.89 for all of them.
_SHEAR = 5.0 / 6.0
# How many modes a free surface adds, as a share of the shear waves that fit on it (0.93 counted on a cube).
_SURFACE = 0.9
# Pressure waves among all that fit into a volume: (c_T/c_L)^3 at a Poisson ratio of 0.3.
_PRESSURE = 0.15


@dataclass(frozen=True)
class SolidLayout:
    """A solid ready to be assembled.

    ``size_m`` (3,) extents; ``spread_m`` the finest patch that the elements resolve; ``mesh`` what names the
    elements in keys.
    """

    cells: Cells
    skin: Skin
    size_m: Array
    spread_m: float
    mesh: tuple[int, ...]
    warnings: tuple[str, ...]


def extents(shape: Shape) -> Array:
    """Extents (3,) along x, y and z, m."""
    if isinstance(shape, BlockShape):
        return np.array(shape.size_m)
    if isinstance(shape, BallShape):
        return np.full(3, shape.diameter_m)
    return np.array([shape.length_m, shape.diameter_m, shape.diameter_m])


def _walls(shape: Shape) -> Array:
    """Extents (3,) of matter: across a bored cylinder, its wall."""
    size = extents(shape)
    if isinstance(shape, CylinderShape) and shape.bore_m is not None:
        size[1:] = 0.5 * (shape.diameter_m - shape.bore_m)
    return size


def wavenumbers(material: MaterialSpec, thick_m: Array, hertz: float) -> Array:
    """Of the slowest wave along x, y and z in a body with walls (3,), rad/m."""
    omega, density = 2.0 * np.pi * hertz, material.density_kg_m3
    g_xz, g_xy, g_yz = material.shear_pa
    young = np.array(material.young_pa)[[0, 2, 1]]
    shear = np.array([min(g_xz, g_xy), min(g_xy, g_yz), min(g_xz, g_yz)])
    plain = omega * np.sqrt(density / shear)
    found = np.zeros(3)
    for axis in range(3):
        across = float(np.delete(thick_m, axis).min())
        bent = bending_wavenumber(
            omega,
            stiffness=np.array(young[axis] * across**3 / 12.0),
            inertia=np.array(density * across),
            turning=np.array(density * across**3 / 12.0),
            shear=np.array(_SHEAR * shear[axis] * across),
        )
        # Waves that bend are the slower ones only where they are long against the wall.
        found[axis] = max(float(plain[axis]), min(float(bent), float(plain[axis]) + np.pi / across))
    return found


def expected_modes(material: MaterialSpec, size_m: Array, volume_m3: float, hertz: float) -> float:
    """About how many modes lie below a frequency; rather too few than too many.

    References
    ----------
    Dupuis, Mazo & Onsager, J. Chem. Phys. 33 (1960) 1452, for the volume and surface terms of a solid.
    """
    omega = 2.0 * np.pi * hertz
    speeds = np.sqrt(np.array(material.shear_pa) / material.density_kg_m3)
    turn = omega / float(np.prod(speeds) ** (1.0 / 3.0))
    a, b, c = np.sort(size_m)[::-1]
    surface = 2.0 * (a * b + b * c + a * c) * volume_m3 / (a * b * c)
    bulk = volume_m3 * turn**3 * (2.0 + _PRESSURE) / (6.0 * np.pi**2) + _SURFACE * surface * turn**2 / (4.0 * np.pi)
    bent = float(wavenumbers(material, size_m, hertz)[int(np.argmax(size_m))])
    thin = a * b * (bent**2 + turn**2) / (4.0 * np.pi)
    slender = a * (2.0 * bent + turn) / np.pi
    return float(max(bulk, thin, slender))


def _volume(shape: Shape) -> float:
    if isinstance(shape, BlockShape):
        return float(np.prod(shape.size_m))
    if isinstance(shape, BallShape):
        return float(np.pi / 6.0 * shape.diameter_m**3)
    return float(0.25 * np.pi * (shape.diameter_m**2 - (shape.bore_m or 0.0) ** 2) * shape.length_m)


def _grid(shape: Shape, wave: Array, order: int) -> Grid:
    size = 2.0 * np.pi * order / (_NODES_PER_WAVE * wave)
    least = order / _LEAST
    if isinstance(shape, BlockShape):
        return block_grid(shape, np.minimum(size, np.array(shape.size_m) * least), order)
    if isinstance(shape, BallShape):
        return ball_grid(shape, min(float(size.min()), 0.25 * np.pi * shape.diameter_m * least), order)
    across = _ACROSS * shape.diameter_m if shape.bore_m is None else np.pi / 8.0 * (shape.diameter_m + shape.bore_m)
    return cylinder_grid(shape, np.minimum(size, np.array([shape.length_m, across, across]) * least), order)


def fewest(make: Callable[[int], Grid]) -> Grid:
    """Of the orders on offer, the one that needs the fewest nodes; the higher one where they are alike."""
    grids = [make(order) for order in ORDERS]
    return min(grids, key=lambda grid: len(grid.nodes_m))


def highest_hz(spec: BodySpec, size_m: Array, volume_m3: float) -> float:
    """Frequency, Hz, up to which a mesh of the body must be good."""
    return top_frequency(
        lambda hertz: expected_modes(spec.material, size_m, volume_m3, hertz),
        wanted=int(_MARGIN * spec.modes.most) + 8,
        highest_hz=spec.modes.solved_or_default_hz,
    )


def lay_solid(spec: BodySpec) -> SolidLayout:
    """Choose elements from the highest wanted frequency, within a budget."""
    shape = spec.shape
    assert isinstance(shape, BlockShape | BallShape | CylinderShape)  # noqa: S101 (the caller sorts the kinds)
    walls, volume = _walls(shape), _volume(shape)
    top = highest_hz(spec, walls if shape.kind != "cylinder" else extents(shape), volume)
    wave = wavenumbers(spec.material, walls, top)
    grid = fewest(lambda order: _grid(shape, wave, order))
    asked, coarser = len(grid.nodes_m), 1.0
    while len(grid.nodes_m) > BUDGET and coarser < _COARSEST:
        coarser *= 1.1
        grid = fewest(lambda order: _grid(shape, wave / coarser, order))  # noqa: B023 (used at once)
    warnings: tuple[str, ...] = ()
    if coarser > 1.0:
        warnings = (
            f"body {spec.name!r}: a mesh of {len(grid.nodes_m)} nodes instead of the {asked} that {top:.0f} Hz asks "
            f"for; modes are resolved up to about {top / coarser:.0f} Hz",
        )
    each = (volume / len(grid.elements)) ** (1.0 / 3.0) / grid.order
    mesh = (grid.order, len(grid.elements), len(grid.nodes_m))
    skin = hex_skin(grid, lambda points: face_of(shape, points))
    return SolidLayout(grid, skin, extents(shape), 1.5 * each, mesh, warnings)


def face_of(shape: Shape, points_m: Array) -> list[str]:
    """Name of the face on which each of (k, 3) points lies."""
    if isinstance(shape, BlockShape):
        off = np.abs(points_m) / (0.5 * np.array(shape.size_m))
        axis = np.argmax(off, axis=1)
        sign = points_m[np.arange(len(points_m)), axis] > 0.0
        return ["xyz"[a] + ("+" if s else "-") for a, s in zip(axis, sign, strict=True)]
    if isinstance(shape, BallShape):
        return ["surface"] * len(points_m)
    half, outer, inner = 0.5 * shape.length_m, 0.5 * shape.diameter_m, 0.5 * (shape.bore_m or 0.0)
    radius = np.hypot(points_m[:, 1], points_m[:, 2])
    miss = np.stack(
        (
            np.abs(points_m[:, 0] + half),
            np.abs(points_m[:, 0] - half),
            np.abs(radius - outer),
            np.abs(radius - inner) if inner else np.full(len(points_m), np.inf),
        )
    )
    names = ("left", "right", "side", "bore")
    return [names[k] for k in np.argmin(miss, axis=0)]
