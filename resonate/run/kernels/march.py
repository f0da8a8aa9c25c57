"""Steps of contacts and modes together.

Every mode follows its exact propagator with the forces held constant over a step; every contact takes the
discrete-gradient force that belongs to the motion it causes. So the energy of modes, strikers and contacts can only
fall, whatever the step, the stiffness or the highest mode.

References
----------
Li & Wu, SIAM J. Sci. Comput. 38 (2016) A1876: exponential integrators with a discrete gradient (from memory).
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.run.kernels.compiled import compiled
from resonate.run.kernels.force import gradient, settle

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

#: Modes come in multiples of this, the rest filled with zeros, so that vector units can take them.
LANES = 32


@compiled
def fold(values: Array) -> float:
    """Sum (n,), n a multiple of 32, in one fixed order that vector units can follow; spoils the values."""
    half = values.shape[0]
    while half % 2 == 0 and half > LANES // 2:
        half //= 2
        for i in range(half):
            values[i] += values[half + i]
    total = 0.0
    for i in range(half):
        total += values[i]
    return total


@compiled
def march(
    q: Array,
    v: Array,
    step: Array,
    load: Array,
    rows: Array,
    contact: Array,
    delta: Array,
    force: Array,
    depth: Array,
    work: Array,
    lost: Array,
    last_q: Array,
    last_v: Array,
) -> tuple[int, int]:
    """March contacts and modes in place through ``force.shape[1]`` steps.

    ``q``, ``v`` (n,) everything that moves, strikers too, each of unit modal mass; ``step`` (4, n) coefficients;
    ``load`` (n,) constant modal force; ``rows`` (k, n) gains: contact j closes by ``-rows[j] @ q``;
    ``contact`` (2, k) stiffness and mu/h; ``delta`` (k,) penetrations; ``force`` (k, s) and ``depth`` (k, s + 1)
    are filled; ``work`` (n,) of the contacts on each mode and ``lost`` (k,) in each contact are added to;
    ``last_q``, ``last_v`` (n,) receive the state after the last step with a force (or before the first, without any).

    Returns the number of steps up to the last one with a force, and of steps done: fewer than asked only if a
    force was not found.
    """
    n, count = q.shape[0], rows.shape[0]
    # All in one block, rows an odd number of 512 bytes apart: rows a multiple of 4096 apart would slow one another.
    space = np.zeros((12 + count, ((n + 63) // 64 | 1) * 64))
    x, u, w2, c, d, g = space[0, :n], space[1, :n], space[2, :n], space[3, :n], space[4, :n], space[5, :n]
    pull, rest, ahead, pushed = space[6, :n], space[7, :n], space[8, :n], space[9, :n]
    done, part, gains = space[10, :n], space[11, :n], space[12:, :n]
    x[:], u[:], pull[:], gains[:] = q, v, load, rows
    w2[:], c[:], d[:], g[:] = step[0], step[1], step[2], step[3]
    give, y_free, now = np.zeros((count, count)), np.zeros(count), np.zeros(count)
    for j in range(count):
        for k in range(count):
            for i in range(n):
                part[i] = gains[j, i] * c[i] * gains[k, i]
            give[j, k] = fold(part)
    for i in range(n):
        rest[i] = pull[i] - w2[i] * x[i]
        ahead[i] = c[i] * rest[i] + d[i] * u[i]
    last, at = 0, 0
    while at < force.shape[1]:
        for j in range(count):
            row = gains[j]
            for i in range(n):
                part[i] = row[i] * ahead[i]
            y_free[j] = -fold(part)
            depth[j, at] = delta[j]
        if not settle(delta, y_free, give, contact[0], contact[1], now):
            break
        acting = False
        for j in range(count):
            force[j, at] = now[j]
            acting = acting or now[j] > 0.0
            y = y_free[j]
            for k in range(count):
                y -= give[j, k] * now[k]
            lost[j] += (now[j] - gradient(delta[j], y, contact[0, j])) * y
            delta[j] += y
        if acting:
            row, size = gains[0], now[0]
            for i in range(n):
                pushed[i] = row[i] * size
            for j in range(1, count):
                row, size = gains[j], now[j]
                for i in range(n):
                    pushed[i] += row[i] * size
            for i in range(n):
                moved = ahead[i] + c[i] * pushed[i]
                u[i] += d[i] * (rest[i] + pushed[i]) - g[i] * u[i]
                done[i] += pushed[i] * moved
                x[i] += moved
                rest[i] = pull[i] - w2[i] * x[i]
                ahead[i] = c[i] * rest[i] + d[i] * u[i]
            last = at + 1
        else:
            if last == at:
                last_q[:], last_v[:] = x, u
            for i in range(n):
                u[i] += d[i] * rest[i] - g[i] * u[i]
                x[i] += ahead[i]
                rest[i] = pull[i] - w2[i] * x[i]
                ahead[i] = c[i] * rest[i] + d[i] * u[i]
        at += 1
    q[:], v[:] = x, u
    work += done
    if last == at:
        last_q[:], last_v[:] = x, u
    depth[:, at] = delta
    return last, at


@compiled
def replay(
    q: Array,
    v: Array,
    step: Array,
    rows: Array,
    force: Array,
    wanted: NDArray[np.int64],
    keep_q: Array,
    keep_v: Array,
) -> None:
    """Modes again from stored ``force`` (k, s); states after ``wanted`` (t,) ascending steps are kept, (t, n)."""
    n = q.shape[0]
    w2, c, d, g = step[0], step[1], step[2], step[3]
    pushed = np.zeros(n)
    at = 0
    for place in range(wanted.shape[0]):
        while at < wanted[place]:
            pushed[:] = 0.0
            for j in range(rows.shape[0]):
                row, size = rows[j], force[j, at]
                for i in range(n):
                    pushed[i] += row[i] * size
            for i in range(n):
                rest = pushed[i] - w2[i] * q[i]
                moved = c[i] * rest + d[i] * v[i]
                v[i] += d[i] * rest - g[i] * v[i]
                q[i] += moved
            at += 1
        keep_q[place] = q
        keep_v[place] = v
