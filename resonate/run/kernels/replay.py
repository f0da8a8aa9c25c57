"""Linear replay of a contact window from its stored forces."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.run.kernels.compiled import compiled

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]


@compiled
def replay(
    q: Array,
    v: Array,
    w2: Array,
    c: Array,
    d: Array,
    g: Array,
    rows: Array,
    force: Array,
    wanted: NDArray[np.int64],
    out_q: Array,
    out_v: Array,
) -> None:
    """Fill ``out_q`` and ``out_v`` (k, n) with the states after ``wanted`` (k,) ascending numbers of steps.

    ``q``, ``v`` (n,) are the state at the start and are moved on; ``force`` (j, s) acts through ``rows`` (j, n).
    """
    total = len(q)
    pushed = np.zeros(total)
    step = 0
    for place in range(len(wanted)):
        while step < wanted[place]:
            pushed[:] = 0.0
            for j in range(len(rows)):
                size, row = force[j, step], rows[j]
                for i in range(total):
                    pushed[i] += row[i] * size
            for i in range(total):
                rest = pushed[i] - w2[i] * q[i]
                moved = c[i] * rest + d[i] * v[i]
                v[i] += d[i] * rest - g[i] * v[i]
                q[i] += moved
            step += 1
        out_q[place] = q
        out_v[place] = v
