"""Mapped hexahedra of blocks, cylinders and balls.

A flat grid is drawn out along x for blocks and cylinders; a ball is a bulged core cube and six shells round it.
Curved sides are met at every node of the surface, so that their error falls with the order of the elements.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.body.outline import cut
from resonate.body.spectral import Grid, lobatto, tensor, weld
from resonate.scene.model import CircleOutline

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.scene.model import BallShape, BlockShape, CylinderShape

    Array = NDArray[np.float64]

# Corners of a ball's core as a share of the radius, and how far its faces are blown up towards a sphere.
_CORE = 0.57
_BULGED = 0.5
# Where the elements of a shell, counted outwards, are as long as those along its faces.
_SHELL = 0.55
# A size that fits but for rounding is enough.
_SLACK = 1e-9


def extrude(flat: Grid, length_m: float, count: int) -> Grid:
    """Draw a flat grid in (y, z) out along x, centred, in ``count`` layers of elements."""
    order = flat.order
    ends = np.linspace(-0.5 * length_m, 0.5 * length_m, count + 1)
    middle, half = 0.5 * (ends[1:] + ends[:-1]), 0.5 * np.diff(ends)
    levels = np.append((middle[:, None] + half[:, None] * lobatto(order)[:-1]).ravel(), ends[-1])
    size = len(flat.nodes_m)
    nodes = np.empty((len(levels), size, 3))
    nodes[:, :, 0] = levels[:, None]
    nodes[:, :, 1:] = flat.nodes_m
    layer = np.arange(count)[:, None] * order + np.arange(order + 1)
    elements = layer[:, None, :, None] * size + flat.elements[None, :, None, :]
    shape = (count * len(flat.elements), (order + 1) ** 3)
    return Grid(order=order, nodes_m=nodes.reshape(-1, 3), elements=elements.reshape(shape))


def block_grid(shape: BlockShape, size_m: Array, order: int) -> Grid:
    """Equal hexahedra of at most ``size_m`` (3,) along x, y and z."""
    x, y, z = (max(1, int(np.ceil(share))) for share in np.array(shape.size_m) / size_m - _SLACK)
    return weld(_places((x, y, z), order) * 0.5 * np.array(shape.size_m), order)


def cylinder_grid(shape: CylinderShape, size_m: Array, order: int) -> Grid:
    """Core-and-shell section, or a ring, drawn out along x."""
    layers = max(1, int(np.ceil(shape.length_m / size_m[0] - _SLACK)))
    if shape.bore_m is None:
        section = cut(CircleOutline(diameter_m=shape.diameter_m), size_m=(float(size_m[1]),) * 2, order=order)
        return extrude(section, shape.length_m, layers)
    outer, inner = 0.5 * shape.diameter_m, 0.5 * shape.bore_m
    radial = max(1, int(np.ceil((outer - inner) / size_m[1] - _SLACK)))
    around = max(4, int(np.ceil(np.pi * (outer + inner) / size_m[2] - _SLACK)))
    share = 0.5 * (_places((radial, around), order) + 1.0)
    radius, angle = inner + (outer - inner) * share[..., 0], 2.0 * np.pi * share[..., 1]
    ring = weld(np.stack((radius * np.cos(angle), radius * np.sin(angle)), axis=-1), order)
    return extrude(ring, shape.length_m, layers)


def _rounded(cube: Array) -> Array:
    """Map the cube [-1, 1]^3 onto the unit ball, smoothly inside, the faces onto the sphere."""
    square = cube**2
    one, two = np.roll(square, -1, axis=-1), np.roll(square, -2, axis=-1)
    return np.asarray(cube * np.sqrt(np.maximum(1.0 - 0.5 * (one + two) + one * two / 3.0, 0.0)))


def _core(cube: Array) -> Array:
    return np.asarray(_CORE * ((1.0 - _BULGED) * cube / np.sqrt(3.0) + _BULGED * _rounded(cube)))


def _places(counts: tuple[int, ...], order: int) -> Array:
    """Nodes (e, k, dim) of equal elements over [-1, 1]^dim."""
    local, _ = tensor(lobatto(order), np.ones(order + 1), len(counts))
    ranges = [np.arange(count) for count in counts]
    corners = np.stack(np.meshgrid(*ranges, indexing="ij"), axis=-1).reshape(-1, len(counts))
    share = (corners[:, None, :] + 0.5 * (local + 1.0)) / np.array(counts)
    return np.asarray(2.0 * share - 1.0)


def ball_grid(shape: BallShape, size_m: float, order: int) -> Grid:
    """Core and shells with elements of at most ``size_m``."""
    radius = 0.5 * shape.diameter_m
    # A quarter of the girth, and the way from the core to the surface.
    around = max(1, int(np.ceil(0.5 * np.pi * radius / size_m - _SLACK)))
    outward = max(1, int(np.ceil(_SHELL * radius / size_m - _SLACK)))
    parts = [_core(_places((around, around, around), order))]
    shell = _places((outward, around, around), order)
    share = 0.5 * (shell[..., :1] + 1.0)
    first, second = shell[..., 1], shell[..., 2]
    inner = _core(np.stack((np.ones_like(first), first, second), axis=-1))
    turn = np.tan(0.25 * np.pi * shell[..., 1:])
    outer = np.concatenate((np.ones_like(share), turn), axis=-1)
    outer /= np.linalg.norm(outer, axis=-1, keepdims=True)
    side = (1.0 - share) * inner + share * outer
    for axis in range(3):
        for sign in (1.0, -1.0):
            # A turn about the diagonal, and for the opposite face half a turn about the next axis.
            turned = np.roll(side, axis, axis=-1)
            if sign < 0.0:
                flip = np.array([-1.0, 1.0, -1.0])
                turned = turned * np.roll(flip, axis)
            parts.append(turned)
    return weld(radius * np.concatenate(parts), order)
