"""An order of elimination that keeps the factors of large meshes sparse: nested dissection.

A thin layer of freedoms parts the graph in two; both parts come first, each dissected again, the layer last. Layers are
levels of distance from the far end of a part, so that long bodies are cut across.

References
----------
George, Nested dissection of a regular finite element mesh, SIAM J. Numer. Anal. 10 (1973) 345.
George & Liu, An automatic nested dissection algorithm for irregular finite element problems, SIAM J. Numer. Anal. 15
(1978) 1053.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy.sparse import csr_matrix

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Indices = NDArray[np.int64]

# Parts of so many freedoms are not cut any more.
_LEAF = 150
# Levels between these shares of a part's freedoms may be its layer.
_FROM, _TO = 0.35, 0.65
# Any seed: it only names patterns.
_SEED = 5_417


def dissection(matrix: csr_matrix) -> Indices:
    """Order (n,) in which to eliminate the freedoms of a symmetric matrix (n, n)."""
    group, graph, weight = _compressed(matrix)
    place = np.empty(len(weight), dtype=np.int64)
    mark = np.zeros(len(weight), dtype=np.int64)
    # Parts still to be ordered, with the place behind their last one; marks tell parts apart.
    parts = [(np.arange(len(weight)), len(weight))]
    fresh = 1
    while parts:
        nodes, end = parts.pop()
        mark[nodes] = fresh
        levels = _levels(graph, nodes, mark, fresh)
        fresh += 1
        if levels is None or weight[nodes].sum() <= _LEAF:
            place[end - len(nodes) : end] = nodes
            continue
        if isinstance(levels, list):
            # Not connected: the pieces one after the other.
            for piece in levels:
                parts.append((piece, end))
                end -= len(piece)
            continue
        layer = _layer(levels, weight[nodes])
        above = nodes[levels > layer]
        # Of a thick level only what touches the next one parts them.
        touching = np.zeros(len(mark), dtype=bool)
        touching[_neighbours(graph, above)] = True
        parting = (levels == layer) & touching[nodes]
        middle, below = nodes[parting], nodes[(levels <= layer) & ~parting]
        place[end - len(middle) : end] = middle
        end -= len(middle)
        for piece in (above, below):
            if len(piece):
                parts.append((piece, end))
                end -= len(piece)
    rank = np.empty(len(place), dtype=np.int64)
    rank[place] = np.arange(len(place))
    return np.argsort(rank[group], kind="stable")


def _compressed(matrix: csr_matrix) -> tuple[Indices, csr_matrix, Indices]:
    """Freedoms with the same neighbours made one node: group (n,), graph (k, k) and freedoms in each (k,)."""
    pattern = csr_matrix((np.ones(matrix.nnz), matrix.indices, matrix.indptr), shape=matrix.shape)
    name = pattern @ np.random.default_rng(_SEED).integers(1, 2**30, size=matrix.shape[0]).astype(np.float64)
    _, first, group, weight = np.unique(name, return_index=True, return_inverse=True, return_counts=True)
    merge = csr_matrix((np.ones(len(group)), (group, np.arange(len(group)))), shape=(len(first), len(group)))
    graph = csr_matrix(merge @ pattern[:, first])
    graph.setdiag(0.0)
    graph.eliminate_zeros()
    return group.astype(np.int64), graph, weight.astype(np.int64)


def _levels(graph: csr_matrix, nodes: Indices, mark: Indices, own: int) -> Indices | list[Indices] | None:
    """Distances (k,) within a part from its far end; its pieces if it is not connected; None if it is one clump."""
    depth = np.full(len(mark), -1, dtype=np.int64)
    # From anywhere to a far end; then from all of that end, so that the levels are as flat as it is.
    start = nodes[:1]
    for _ in range(3):
        depth[nodes] = -1
        start = _spread(graph, start, depth, mark, own)
    reached = depth[nodes] >= 0
    if not reached.all():
        return [nodes[reached], nodes[~reached]]
    return depth[nodes] if depth[start[0]] > 1 else None


def _spread(graph: csr_matrix, start: Indices, depth: Indices, mark: Indices, own: int) -> Indices:
    front, level = start, 0
    depth[front] = 0
    while True:
        near = _neighbours(graph, front)
        near = near[(depth[near] < 0) & (mark[near] == own)]
        if not len(near):
            return front
        level += 1
        front = np.unique(near)
        depth[front] = level


def _neighbours(graph: csr_matrix, nodes: Indices) -> Indices:
    """Neighbours of some nodes, one after the other."""
    begin = graph.indptr[nodes].astype(np.int64)
    count = graph.indptr[nodes + 1] - begin
    before = np.concatenate((np.zeros(1, dtype=np.int64), np.cumsum(count)[:-1]))
    return np.asarray(graph.indices[np.repeat(begin - before, count) + np.arange(count.sum())], dtype=np.int64)


def _layer(levels: Indices, weight: Indices) -> int:
    """The lightest level near the middle."""
    size = np.bincount(levels, weights=weight)
    before = np.cumsum(size) - 0.5 * size
    share = before / size.sum()
    near = np.flatnonzero((share > _FROM) & (share < _TO))
    if not len(near):
        near = np.array([int(np.argmin(np.abs(share - 0.5)))])
    near = near[(near > 0) & (near < len(size) - 1)] if len(size) > 2 else near  # noqa: PLR2004 (ends part nothing)
    return int(near[int(np.argmin(size[near]))]) if len(near) else 1
