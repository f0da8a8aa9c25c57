"""Steps of contacts and modes together.

Every mode follows its exact propagator with the forces held constant over a step; every contact takes the
discrete-gradient force that belongs to the motion it causes. So the energy of modes, strikers and contacts can only
fall, whatever the step, the stiffness or the highest mode. One contact is a Hunt-Crossley contact on Hertz, solved
implicitly: ``y - y_free + C F(y) = 0`` with ``F(y) = max(0, s(y) (1 + mu y/h))`` and ``s`` the discrete gradient of
``V = (2/5) K delta^(5/2)``. F does not fall with y, so the root is unique in [y_free - C F(y_free), y_free].

All loops that call one another stand in this file: what is kept compiled is looked up by the caller's file alone.

References
----------
Hunt & Crossley, J. Appl. Mech. 42 (1975) 440. Chatziioannou & van Walstijn, J. Sound Vib. 339 (2015) 262:
the discrete gradient of a contact potential. Li & Wu, SIAM J. Sci. Comput. 38 (2016) A1876: exponential integrators
with a discrete gradient (from memory).
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from resonate.run.kernels.compiled import compiled

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

#: Modes come in multiples of this, the rest filled with zeros, so that vector units can take them.
LANES = 32
# Relative size of the equation's remainder at which it counts as solved.
_TOLERANCE = 1e-14
_ROUNDING = 4e-16
_BISECT_EVERY = 8
_MOST = 200
_QUICK = 6
# Sweeps over several contacts, and the relative change of where a contact goes at which they agree.
_SWEEPS = 400
_AGREED = 1e-14


@compiled
def gradient(delta: float, y: float, stiffness: float) -> float:
    """Secant slope [V(delta + y) - V(delta)] / y, N, without cancellation."""
    later = delta + y
    if delta > 0.0 and later > 0.0:
        a, b = math.sqrt(delta), math.sqrt(later)
        total = delta * delta + delta * a * b + delta * later + a * b * later + later * later
        return 0.4 * stiffness * total / (a + b)
    if later > 0.0:
        return 0.4 * stiffness * later * later * math.sqrt(later) / y
    if delta > 0.0:
        return 0.4 * stiffness * delta * delta * math.sqrt(delta) / (-y)
    return 0.0


@compiled
def pressed(delta: float, y: float, stiffness: float, loss: float) -> float:
    """Mean force over a step that takes the penetration from ``delta`` to ``delta + y``; ``loss`` is mu/h."""
    return max(0.0, gradient(delta, y, stiffness) * (1.0 + loss * y))


@compiled
def bracketed(delta: float, y_free: float, give: float, stiffness: float, loss: float) -> float:
    """Mean force of one step by secants within the bracket, whatever the contact; negative if it was not found."""
    top = pressed(delta, y_free, stiffness, loss)
    if top == 0.0:
        return 0.0
    high, high_left = y_free, give * top
    low = y_free - give * top
    low_left = low - y_free + give * pressed(delta, low, stiffness, loss)
    side = 0
    for turn in range(1, _MOST):
        y = 0.5 * (low + high)
        if turn % _BISECT_EVERY and high_left > low_left:
            secant = (low * high_left - high * low_left) / (high_left - low_left)
            if low <= secant <= high:
                y = secant
        force = pressed(delta, y, stiffness, loss)
        left = y - y_free + give * force
        # Where the bracket has shrunk to rounding, no better answer can be told apart.
        if abs(left) <= _TOLERANCE * (abs(y_free) + give * force) or high - low <= _ROUNDING * max(abs(low), abs(high)):
            return force
        # An end that stays twice counts half (the Illinois rule), so that both ends close in.
        if left > 0.0:
            high, high_left = y, left
            if side == 1:
                low_left *= 0.5
            side = 1
        else:
            low, low_left = y, left
            if side == -1:
                high_left *= 0.5
            side = -1
    return -1.0


@compiled
def solve(delta: float, y_free: float, give: float, stiffness: float, loss: float, guess: float) -> float:
    """Mean force of one step; ``give`` is the compliance C, ``guess`` a force near it. Negative if it was not found."""
    # Contacts resolved by many steps give way little in one: from the last force two or three looks are enough.
    y, before, before_left = y_free - give * guess, 0.0, 0.0
    for turn in range(_QUICK):
        force = pressed(delta, y, stiffness, loss)
        left = y - y_free + give * force
        if abs(left) <= _TOLERANCE * (abs(y_free) + give * force):
            return force
        slope = (left - before_left) / (y - before) if turn and y != before else 1.0
        before, before_left = y, left
        # The left side rises at least as fast as y.
        y -= left / max(1.0, slope)
    return bracketed(delta, y_free, give, stiffness, loss)


@compiled
def settle(delta: Array, y_free: Array, give: Array, stiffness: Array, loss: Array, force: Array) -> bool:
    """Forces (k,) of all contacts: y + W F(y) = y_free by nonlinear Gauss-Seidel; False if not found.

    The forces minimise a convex function and each sweep descends it, so it always converges. ``force`` holds the
    last step's as a start; ``give`` (k, k) is W, ``loss`` (k,) mu/h.
    """
    count = delta.shape[0]
    for _ in range(_SWEEPS):
        agreed = True
        for j in range(count):
            reach = y_free[j]
            for k in range(count):
                if k != j:
                    reach -= give[j, k] * force[k]
            found = solve(delta[j], reach, give[j, j], stiffness[j], loss[j], force[j])
            if found < 0.0:
                return False
            # What a change of force moves by less than rounding is no change; errors shrink further with every sweep.
            moved = give[j, j] * abs(found - force[j])
            agreed = agreed and moved <= _AGREED * (abs(reach) + give[j, j] * found)
            force[j] = found
        if agreed or count == 1:
            return True
    return False


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
