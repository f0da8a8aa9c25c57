"""Steps of contacts and modes together.

Every mode follows its exact propagator with the forces held constant over a step; every contact takes the
discrete-gradient force that belongs to the motion it causes. So the energy of modes, strikers and contacts can only
fall, whatever the step, the stiffness or the highest mode (an exponential discrete-gradient method).
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.run.kernels.compiled import compiled
from resonate.run.kernels.force import pressed, solve, stored

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    IntArray = NDArray[np.int64]

_SWEEPS = 400
_AGREED = 1e-14


@compiled
def march_one(
    q: Array,
    v: Array,
    step: Array,
    row: Array,
    drift: Array,
    contact: Array,
    striker: Array,
    work: Array,
    force: Array,
    depth: Array,
    begin: int,
    quiet: int,
    h: float,
) -> int:
    """March one contact in place; returns the number of the step it stopped before.

    ``step`` (6, n) coefficients; ``row`` (n,) gains; ``drift`` (t,) motion of the surface that no force causes;
    ``contact`` [stiffness, mu]; ``striker`` [penetration, velocity, mass, lost energy, steps without force];
    ``work`` (n,) done on each mode; ``force`` (t,), ``depth`` (t,) penetration at the end of each step.
    """
    n = q.shape[0]
    e11, e12, e21, e22, c, d = step[0], step[1], step[2], step[3], step[4], step[5]
    stiffness, loss = contact[0], contact[1] / h
    delta, speed, mass = striker[0], striker[1], striker[2]
    idle = int(striker[4])
    give = 0.5 * h * h / mass
    for i in range(n):
        give += row[i] * row[i] * c[i]
    moved = 0.0
    for i in range(n):
        moved += row[i] * ((e11[i] - 1.0) * q[i] + e12[i] * v[i])
    at = begin
    while at < force.shape[0]:
        y_free = speed * h - moved - drift[at]
        y, f = solve(delta, y_free, give, stiffness, loss)
        striker[3] += f * y - (stored(delta + y, stiffness) - stored(delta, stiffness))
        force[at] = f
        delta += y
        depth[at] = delta
        speed -= h * f / mass
        s0, s1, s2, s3 = 0.0, 0.0, 0.0, 0.0
        blocks = n // 4
        for b in range(blocks):
            for k in range(4):
                i = 4 * b + k
                pushed = row[i] * f
                old = q[i]
                new = e11[i] * old + e12[i] * v[i] + c[i] * pushed
                fast = e21[i] * old + e22[i] * v[i] + d[i] * pushed
                work[i] += pushed * (new - old)
                q[i] = new
                v[i] = fast
                part = row[i] * ((e11[i] - 1.0) * new + e12[i] * fast)
                if k == 0:
                    s0 += part
                elif k == 1:
                    s1 += part
                elif k == 2:  # noqa: PLR2004 (third of four lanes)
                    s2 += part
                else:
                    s3 += part
        for i in range(4 * blocks, n):
            pushed = row[i] * f
            old = q[i]
            new = e11[i] * old + e12[i] * v[i] + c[i] * pushed
            fast = e21[i] * old + e22[i] * v[i] + d[i] * pushed
            work[i] += pushed * (new - old)
            q[i] = new
            v[i] = fast
            s0 += row[i] * ((e11[i] - 1.0) * new + e12[i] * fast)
        moved = (s0 + s1) + (s2 + s3)
        at += 1
        if f > 0.0:
            idle = 0
        else:
            idle += 1
        if idle >= quiet:
            break
    striker[0], striker[1], striker[4] = delta, speed, idle
    return at


@compiled
def settle(delta: Array, y_free: Array, give: Array, contact: Array, h: float, y: Array, force: Array) -> int:
    """Solve many contacts at once: y + W F(y) = y_free by nonlinear Gauss-Seidel.

    The forces minimise a convex function and each sweep descends it, so it always converges. ``force`` holds the
    last step's as a start. Returns the number of sweeps.
    """
    count = delta.shape[0]
    scale = 0.0
    for j in range(count):
        scale = max(scale, abs(y_free[j]) + give[j, j] * pressed(delta[j], y_free[j], contact[j, 0], contact[j, 1] / h))
    sweeps = 0
    while sweeps < _SWEEPS:
        sweeps += 1
        change = 0.0
        for j in range(count):
            reach = y_free[j]
            for k in range(count):
                if k != j:
                    reach -= give[j, k] * force[k]
            _, f = solve(delta[j], reach, give[j, j], contact[j, 0], contact[j, 1] / h)
            change = max(change, give[j, j] * abs(f - force[j]))
            force[j] = f
        if change <= _AGREED * scale:
            break
    for j in range(count):
        y[j] = y_free[j]
        for k in range(count):
            y[j] -= give[j, k] * force[k]
    return sweeps


@compiled
def march_many(
    q: Array,
    v: Array,
    step: Array,
    rows: Array,
    drift: Array,
    contact: Array,
    striker: Array,
    work: Array,
    force: Array,
    depth: Array,
    begin: int,
    quiet: int,
    h: float,
) -> int:
    """The same for several contacts; arrays gain a leading axis of contacts."""
    n, count = q.shape[0], rows.shape[0]
    e11, e12, e21, e22, c, d = step[0], step[1], step[2], step[3], step[4], step[5]
    give = np.zeros((count, count))
    for j in range(count):
        give[j, j] = 0.5 * h * h / striker[j, 2]
        for k in range(count):
            for i in range(n):
                give[j, k] += rows[j, i] * c[i] * rows[k, i]
    delta, y, y_free, now = np.zeros(count), np.zeros(count), np.zeros(count), np.zeros(count)
    for j in range(count):
        delta[j] = striker[j, 0]
    idle = int(striker[0, 4])
    at = begin
    while at < force.shape[1]:
        for j in range(count):
            moved = 0.0
            for i in range(n):
                moved += rows[j, i] * ((e11[i] - 1.0) * q[i] + e12[i] * v[i])
            y_free[j] = striker[j, 1] * h - moved - drift[j, at]
        settle(delta, y_free, give, contact, h, y, now)
        total = 0.0
        for j in range(count):
            stiffness = contact[j, 0]
            gained = stored(delta[j] + y[j], stiffness) - stored(delta[j], stiffness)
            striker[j, 3] += now[j] * y[j] - gained
            delta[j] += y[j]
            striker[j, 1] -= h * now[j] / striker[j, 2]
            force[j, at] = now[j]
            depth[j, at] = delta[j]
            total += now[j]
        for i in range(n):
            pushed = 0.0
            for j in range(count):
                pushed += rows[j, i] * now[j]
            old = q[i]
            new = e11[i] * old + e12[i] * v[i] + c[i] * pushed
            v[i] = e21[i] * old + e22[i] * v[i] + d[i] * pushed
            work[i] += pushed * (new - old)
            q[i] = new
        at += 1
        idle = 0 if total > 0.0 else idle + 1
        if idle >= quiet:
            break
    for j in range(count):
        striker[j, 0] = delta[j]
        striker[j, 4] = idle
    return at


@compiled
def replay(
    q: Array, v: Array, step: Array, rows: Array, force: Array, wanted: IntArray, keep_q: Array, keep_v: Array
) -> None:
    """Modes again from stored forces; states before the ``wanted`` (ascending) steps are kept, (k, n)."""
    n, count = q.shape[0], rows.shape[0]
    place = 0
    for at in range(force.shape[1] + 1):
        while place < wanted.shape[0] and wanted[place] == at:
            for i in range(n):
                keep_q[place, i] = q[i]
                keep_v[place, i] = v[i]
            place += 1
        if place == wanted.shape[0] or at == force.shape[1]:
            break
        for i in range(n):
            pushed = 0.0
            for j in range(count):
                pushed += rows[j, i] * force[j, at]
            old = q[i]
            q[i] = step[0, i] * old + step[1, i] * v[i] + step[4, i] * pushed
            v[i] = step[2, i] * old + step[3, i] * v[i] + step[5, i] * pushed
