"""What is seen and heard of a vessel: its display mesh and the patches of its outside."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.body.body import Radiator, Surface
from resonate.body.display import join, lattice
from resonate.body.spectral import lagrange, lobatto, lobatto_weights
from resonate.body.vessel_layout import ORDER, VesselLayout

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

# Vertices of a display mesh, about.
_VERTICES = 5000
# Fewest and most round the axis.
_ROUND = (24, 96)


def _spun(curve: Array, turn: Array) -> Array:
    """Lattice (k, t, 3) of a curve (k, 2) of radius and height turned round y."""
    radius = curve[:, :1]
    height = np.broadcast_to(curve[:, 1:], (len(curve), len(turn)))
    return np.stack((radius * np.cos(turn), height, radius * np.sin(turn)), axis=2)


def display(layout: VesselLayout) -> Surface:
    """Closed mesh: outside, inside and the open edges."""
    step = next(k for k in (1, 2, 4, 8) if k == ORDER or layout.elements * ORDER / k <= _VERTICES / _ROUND[1])
    kept = (np.arange(layout.elements)[:, None] * (ORDER + 1) + np.arange(0, ORDER, step)).ravel()
    kept = np.concatenate((kept, [layout.elements * (ORDER + 1) - 1]))
    nodes = layout.nodes
    middle, fibre = nodes.place_m[kept], 0.5 * nodes.wall_m[kept, None] * nodes.outward[kept]
    turn = np.linspace(0.0, 2.0 * np.pi, int(np.clip(_VERTICES / (2 * len(kept)), *_ROUND)) + 1)
    turn[-1] = 0.0
    outer, inner = middle + fibre, middle - fibre
    curves = [outer, inner[::-1]]
    if not layout.closed[1]:
        curves.append(np.stack((outer[-1], inner[-1])))
    if not layout.closed[0]:
        curves.append(np.stack((inner[0], outer[0])))
    return join([lattice(_spun(curve, turn)) for curve in curves])


def patches(layout: VesselLayout, *, around: int) -> Radiator:
    """Samples of the outside with their areas, ``around`` to each circle."""
    nodes = layout.nodes
    turn = 2.0 * np.pi * np.arange(around) / around
    place = nodes.place_m + 0.5 * nodes.wall_m[:, None] * nodes.outward
    _, slope = lagrange(ORDER, lobatto(ORDER))
    speed = np.linalg.norm(np.einsum("qk,ekd->eqd", slope, layout.per_node(place)), axis=2)
    ring = (speed * lobatto_weights(ORDER)).ravel() * np.maximum(place[:, 0], 0.0) * 2.0 * np.pi / around
    kept = ring > 1e-9 * float(ring.max())
    points, normals = (_spun(what[kept], turn).reshape(-1, 3) for what in (place, nodes.outward))
    weights = np.zeros_like(points)
    weights[:, 0] = np.repeat(ring[kept], around)
    return Radiator("surface", points, normals, weights)
