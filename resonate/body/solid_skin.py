"""The surface of solid elements: where it lies, how it faces, and what may be held or seen of it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from resonate.body.display import join, lattice
from resonate.body.spectral import basis, gauss, lobatto, lobatto_weights, tensor, weld

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from resonate.body.body import Surface
    from resonate.body.spectral import Grid

    Array = NDArray[np.float64]
    IntArray = NDArray[np.int64]

# Points of each side of a face at which it radiates.
_RADIATING = 4
# At most about this many vertices in the display mesh.
_VERTICES = 3000


@dataclass(frozen=True)
class Skin:
    """Samples of a closed surface.

    ``points_m`` and outward ``normals`` (n, 3) with ``area_m2`` (n,): the radiating points; ``nodes``, by face:
    numbers (k,), outward normals (k, 3) and the area (k,) that each stands for; ``surface``: the display mesh.
    """

    points_m: Array
    normals: Array
    area_m2: Array
    nodes: dict[str, tuple[IntArray, Array, Array]]
    surface: Surface


@dataclass(frozen=True)
class _Faces:
    # Faces (f,) of one direction: elements, and the side (-1 or 1) of the coordinate `axis`.
    grid: Grid
    element: IntArray
    axis: int
    side: int

    def local(self, flat: Array) -> Array:
        return np.insert(flat, self.axis, float(self.side), axis=1)

    def places(self, flat: Array) -> Array:
        """Points (f, q, 3) at ``flat`` (q, 2) coordinates of the face."""
        value, _ = basis(self.grid.order, self.local(flat))
        return np.asarray(np.einsum("qk,ekd->eqd", value, self.grid.nodes_m[self.grid.elements[self.element]]))

    def areas(self, flat: Array) -> Array:
        """Outward normals (f, q, 3) as long as the area of a unit of the face's coordinates."""
        _, slope = basis(self.grid.order, self.local(flat))
        turn = np.einsum("qks,ekd->eqds", slope, self.grid.nodes_m[self.grid.elements[self.element]])
        first, second = (a for a in range(3) if a != self.axis)
        area = np.cross(turn[..., first], turn[..., second])
        outward = np.einsum("eqd,eqd->eq", area, turn[..., self.axis]) * self.side
        return np.asarray(area * np.sign(outward)[..., None])

    def nodes(self) -> IntArray:
        """Numbers (f, (order + 1)^2) of the nodes, in the order of the face's coordinates."""
        count = self.grid.order + 1
        cube = self.grid.elements[self.element].reshape(-1, count, count, count)
        face: IntArray = np.take(cube, -1 if self.side > 0 else 0, axis=self.axis + 1)
        return face.reshape(len(self.element), -1)


def _outside(grid: Grid) -> list[_Faces]:
    count = grid.order + 1
    corner = [0, count - 1, count * (count - 1), count * count - 1]
    every = np.arange(len(grid.elements))
    kinds = [_Faces(grid, every, axis, side) for axis in range(3) for side in (-1, 1)]
    keys = np.concatenate([np.sort(kind.nodes()[:, corner], axis=1) for kind in kinds])
    _, place, times = np.unique(keys, axis=0, return_inverse=True, return_counts=True)
    alone = (times[place.ravel()] == 1).reshape(len(kinds), -1)
    return [
        _Faces(grid, np.flatnonzero(single), kind.axis, kind.side) for kind, single in zip(kinds, alone, strict=True)
    ]


def hex_skin(grid: Grid, name: Callable[[Array], list[str]]) -> Skin:
    """Surface of mapped hexahedra; ``name`` says on which face each of (k, 3) points lies."""
    kinds = [kind for kind in _outside(grid) if len(kind.element)]
    flat, weight = tensor(*gauss(_RADIATING), 2)
    points, areas, nodes, normals, shares, labels = [], [], [], [], [], []
    own, own_weight = tensor(lobatto(grid.order), lobatto_weights(grid.order), 2)
    for kind in kinds:
        points.append(kind.places(flat).reshape(-1, 3))
        areas.append((kind.areas(flat) * weight[:, None]).reshape(-1, 3))
        nodes.append(kind.nodes())
        normal = kind.areas(own) * own_weight[:, None]
        normals.append(normal)
        shares.append(np.linalg.norm(normal, axis=2))
        labels.extend(name(kind.places(np.zeros((1, 2)))[:, 0]))
    area = np.concatenate(areas)
    size = np.linalg.norm(area, axis=1)
    label = np.array(labels)
    all_nodes, all_normals, all_shares = np.concatenate(nodes), np.concatenate(normals), np.concatenate(shares)
    by_face = {
        face: gathered(all_nodes[label == face], all_normals[label == face], all_shares[label == face])
        for face in dict.fromkeys(labels)
    }
    by_face.setdefault("surface", gathered(all_nodes, all_normals, all_shares))
    return Skin(np.concatenate(points), area / size[:, None], size, by_face, _shown(kinds, label))


def gathered(nodes: IntArray, normals: Array, shares: Array) -> tuple[IntArray, Array, Array]:
    """Sum what faces say of the nodes that they share."""
    numbers, place = np.unique(nodes, return_inverse=True)
    place = place.ravel()
    normal, area = np.zeros((len(numbers), 3)), np.zeros(len(numbers))
    np.add.at(normal, place, normals.reshape(-1, 3))
    np.add.at(area, place, shares.ravel())
    length = np.linalg.norm(normal, axis=1, keepdims=True)
    return numbers, normal / np.maximum(length, 1e-300), area


def _shown(kinds: list[_Faces], label: NDArray[np.str_]) -> Surface:
    total = sum(len(kind.element) for kind in kinds)
    per_side = int(np.clip(np.sqrt(_VERTICES / total), 1, kinds[0].grid.order + 2))
    line = np.linspace(-1.0, 1.0, per_side + 1)
    flat, _ = tensor(line, line, 2)
    places = np.concatenate([kind.places(flat) for kind in kinds])
    areas = np.concatenate([kind.areas(np.zeros((1, 2)))[:, 0] for kind in kinds])
    sheets = []
    for face in dict.fromkeys(label.tolist()):
        chosen = label == face
        mesh = weld(places[chosen], per_side)
        triangles = []
        for element, area in zip(mesh.elements, areas[chosen], strict=True):
            points = mesh.nodes_m[element]
            _, local = lattice(points.reshape(per_side + 1, per_side + 1, 3))
            corners = points[local]
            facing = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0]).sum(axis=0) @ area
            triangles.append(element[local if facing > 0.0 else local[:, ::-1]])
        sheets.append((mesh.nodes_m, np.concatenate(triangles)))
    return join(sheets)
