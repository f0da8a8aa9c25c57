"""Where a surface runs through itself."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numba import njit

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    IntArray = NDArray[np.int64]

# A corner this close to a plane, as a share of the size, touches it and does not cross.
_TOUCH = 1e-9


def crossings(points_m: Array, triangles: IntArray, *, most: int = 1000) -> int:
    """Count pairs of triangles without a common corner that run through each other, up to ``most``.

    Pairs are sorted out by their boxes along x, then each side of the one is put against the other.

    References
    ----------
    Moller & Trumbore, J. Graphics Tools 2 (1997) 21.
    """
    corners = points_m[triangles]
    low, high = corners.min(axis=1), corners.max(axis=1)
    axis = int(np.argmax(np.ptp(points_m, axis=0)))
    order = np.argsort(low[:, axis], kind="stable")
    size = float(np.ptp(points_m, axis=0).max())
    return int(_count(corners[order], low[order], high[order], triangles[order], axis, _TOUCH * size, most))


@njit(cache=True)
def _pierces(start: Array, stop: Array, one: Array, two: Array, three: Array, touch: float) -> bool:
    first, second = two - one, three - one
    normal = np.cross(first, second)
    length = np.sqrt(normal @ normal)
    below, above = normal @ (start - one) / length, normal @ (stop - one) / length
    if not ((below < -touch and above > touch) or (below > touch and above < -touch)):
        return False
    share = below / (below - above)
    at = start + share * (stop - start) - one
    u = np.cross(at, second) @ normal / (length * length)
    v = np.cross(first, at) @ normal / (length * length)
    return bool(u > 0.0 and v > 0.0 and u + v < 1.0)


@njit(cache=True)
def _count(  # noqa: C901 (a compiled loop is one piece)
    corners: Array, low: Array, high: Array, names: IntArray, axis: int, touch: float, most: int
) -> int:
    found = 0
    first, second = (axis + 1) % 3, (axis + 2) % 3
    for i in range(len(corners)):
        for j in range(i + 1, len(corners)):
            if low[j, axis] > high[i, axis]:
                break
            if low[j, first] > high[i, first] or high[j, first] < low[i, first]:
                continue
            if low[j, second] > high[i, second] or high[j, second] < low[i, second]:
                continue
            common = False
            for a in range(3):
                for b in range(3):
                    common = common or names[i, a] == names[j, b]
            if common:
                continue
            for k in range(3):
                after = (k + 1) % 3
                if _pierces(corners[i, k], corners[i, after], corners[j, 0], corners[j, 1], corners[j, 2], touch) or (
                    _pierces(corners[j, k], corners[j, after], corners[i, 0], corners[i, 1], corners[i, 2], touch)
                ):
                    found += 1
                    break
            if found >= most:
                return found
    return found
