"""Contact stepping: exact oscillators and an implicit force that can never add energy.

Every body motion, striker and pseudo-mode of a window is an oscillator of unit modal mass; contact c opens or
closes by ``delta_c = const - sum_i b_ci q_i``. One step holds the forces constant, so that the work on
the oscillators is exactly ``-F y`` with y the change of delta; with F the secant slope of the contact
potential times a non-negative factor the energy can only fall.

References
----------
Hunt & Crossley, J. Appl. Mech. 42 (1975) 440. Chatziioannou & van Walstijn, J. Sound Vib. 339 (2015) 262:
discrete gradient of the contact potential. Li & Wu, SIAM J. Sci. Comput. 38 (2016) A1876: exponential
integrators with a discrete gradient.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.run.kernels.compiled import compiled

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

#: Oscillators come in multiples of this, the rest filled with zeros.
LANES = 32
# Solved when what is left of the equation is this share of its terms.
_ENOUGH = 1e-13
_MOST_SWEEPS = 200
_MOST_TRIES = 200
# Every so often the bracket is halved, whatever the secant says.
_HALVE = 8
HERTZ = 1.5
_NEAR = 1e-4


@compiled
def slope(delta: float, y: float, stiffness: float, power: float) -> float:
    """Secant slope ``[V(delta + y) - V(delta)] / y`` of ``V = K [delta]_+^(p+1) / (p+1)``."""
    after = delta + y
    if delta <= 0.0 and after <= 0.0:
        return 0.0
    if power == HERTZ:
        a = np.sqrt(delta) if delta > 0.0 else 0.0
        b = np.sqrt(after) if after > 0.0 else 0.0
        if a > 0.0 and b > 0.0:
            a2, b2 = a * a, b * b
            total = a2 * a2 + a2 * a * b + a2 * b2 + a * b * b2 + b2 * b2
            return 0.4 * stiffness * total / (a + b)
        if b > 0.0:
            return 0.4 * stiffness * b * b * b * b * b / y
        return 0.4 * stiffness * a * a * a * a * a / (-y)
    if delta > 0.0 and after > 0.0 and abs(y) < _NEAR * delta:
        middle = delta + 0.5 * y
        third = stiffness * power * (power - 1.0) * middle ** (power - 2.0)
        return stiffness * middle**power + y * y / 24.0 * third
    before_v = delta ** (power + 1.0) if delta > 0.0 else 0.0
    after_v = after ** (power + 1.0) if after > 0.0 else 0.0
    return stiffness / (power + 1.0) * (after_v - before_v) / y


@compiled
def push(delta: float, y: float, stiffness: float, power: float, rate: float) -> float:
    """Contact force held over a step in which delta grows by y; ``rate`` is mu / h."""
    return max(0.0, slope(delta, y, stiffness, power) * (1.0 + rate * y))


@compiled
def solve(delta: float, free: float, give: float, stiffness: float, power: float, rate: float) -> float:
    """Force of one contact: the one root of ``y - free + give F(y) = 0``; negative if not found."""
    high = free
    force = push(delta, high, stiffness, power, rate)
    if force == 0.0:
        return 0.0
    high_r = give * force
    low = free - high_r
    low_r = low - free + give * push(delta, low, stiffness, power, rate)
    side = 0
    for tried in range(1, _MOST_TRIES):
        y = 0.5 * (low + high)
        if tried % _HALVE != 0 and high_r != low_r:
            secant = high - high_r * (high - low) / (high_r - low_r)
            if low <= secant <= high:
                y = secant
        force = push(delta, y, stiffness, power, rate)
        left = y - free + give * force
        if abs(left) <= _ENOUGH * (abs(free) + give * force) or y == low or y == high:
            return force
        # An end that stays twice counts half (the Illinois rule), so that both ends close in.
        if left > 0.0:
            high, high_r = y, left
            if side > 0:
                low_r *= 0.5
            side = 1
        else:
            low, low_r = y, left
            if side < 0:
                high_r *= 0.5
            side = -1
    return -1.0


@compiled
def solve_all(
    delta: Array, free: Array, give: Array, stiffness: Array, power: Array, rate: Array, force: Array
) -> bool:
    """Forces (k,) of all contacts of a step, starting from those in ``force``; False if not found.

    Nonlinear Gauss-Seidel: descends block by block on a convex function, so it always converges.
    """
    count = len(delta)
    for _ in range(_MOST_SWEEPS):
        moved, largest = 0.0, 0.0
        for j in range(count):
            alone = free[j]
            for k in range(count):
                if k != j:
                    alone -= give[j, k] * force[k]
            found = solve(delta[j], alone, give[j, j], stiffness[j], power[j], rate[j])
            if found < 0.0:
                return False
            moved = max(moved, abs(found - force[j]))
            largest = max(largest, found)
            force[j] = found
        if count == 1 or moved <= _ENOUGH * largest:
            return True
    return False


@compiled
def fold(values: Array, count: int) -> float:
    """Sum of ``count`` values, a multiple of 32, in one fixed order that can use vector units; spoils them."""
    half = count
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
    w2: Array,
    c: Array,
    d: Array,
    g: Array,
    load: Array,
    rows: Array,
    work: Array,
    delta: Array,
    give: Array,
    stiffness: Array,
    power: Array,
    rate: Array,
    force: Array,
    gap: Array,
    loss: Array,
    q_last: Array,
    v_last: Array,
) -> tuple[int, int]:
    """Step all oscillators (n,) through ``force.shape[1]`` steps; see ``Stage`` for what the arrays are.

    Returns the number of steps up to the last one with a force (its state goes to ``q_last`` and
    ``v_last``), and the number of steps done: fewer than asked if a force was not found.
    """
    count, total = rows.shape
    steps = force.shape[1]
    pushed, rest, ahead, part = np.zeros(total), np.zeros(total), np.zeros(total), np.zeros(total)
    free, now = np.zeros(count), np.zeros(count)
    for i in range(total):
        rest[i] = load[i] - w2[i] * q[i]
        ahead[i] = c[i] * rest[i] + d[i] * v[i]
    last = 0
    for step in range(steps):
        for j in range(count):
            row = rows[j]
            for i in range(total):
                part[i] = row[i] * ahead[i]
            free[j] = -fold(part, total)
            gap[j, step] = delta[j]
        if not solve_all(delta, free, give, stiffness, power, rate, now):
            return last, step
        acting = False
        for j in range(count):
            force[j, step] = now[j]
            acting = acting or now[j] > 0.0
        if acting:
            row, size = rows[0], now[0]
            for i in range(total):
                pushed[i] = row[i] * size
            for j in range(1, count):
                row, size = rows[j], now[j]
                for i in range(total):
                    pushed[i] += row[i] * size
            for i in range(total):
                moved = ahead[i] + c[i] * pushed[i]
                v[i] += d[i] * (rest[i] + pushed[i]) - g[i] * v[i]
                work[i] += pushed[i] * moved
                q[i] += moved
                rest[i] = load[i] - w2[i] * q[i]
                ahead[i] = c[i] * rest[i] + d[i] * v[i]
        else:
            for i in range(total):
                v[i] += d[i] * rest[i] - g[i] * v[i]
                q[i] += ahead[i]
                rest[i] = load[i] - w2[i] * q[i]
                ahead[i] = c[i] * rest[i] + d[i] * v[i]
        for j in range(count):
            y = free[j]
            for k in range(count):
                y -= give[j, k] * now[k]
            loss[j] += (now[j] - slope(delta[j], y, stiffness[j], power[j])) * y
            delta[j] += y
        if acting:
            last = step + 1
            q_last[:] = q
            v_last[:] = v
    for j in range(count):
        gap[j, steps] = delta[j]
    return last, steps
