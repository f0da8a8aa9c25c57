"""The contact stage: 300 modes under one striker at 192 kHz, against the same steps written with numpy.

Run with ``python tests/bench/bench_contact.py``. Answers are compared before anything is timed.
"""

from __future__ import annotations

import os

# One core, also for the peer's matrix products.
os.environ.setdefault("OMP_NUM_THREADS", "1")
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

import sys
import time
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[2]))

from resonate.run.kernels.march import LANES, march
from resonate.run.propagator import coefficients

RATE_HZ = 192_000.0
MODES = 300
STEPS = 19_200
# Promise of the contact stage, times real time.
PROMISED = 5.0


def setting(strikers: int) -> dict[str, np.ndarray]:
    """A plate's worth of modes from 60 Hz to 80 kHz; heavy soft strikers that stay in contact all the time."""
    rng = np.random.default_rng(3)
    total = -(-(MODES + strikers) // LANES) * LANES
    omega, decay, rows, v = np.zeros(total), np.zeros(total), np.zeros((strikers, total)), np.zeros(total)
    omega[:MODES] = 2.0 * np.pi * np.sort(60.0 + (80e3 - 60.0) * rng.random(MODES))
    decay[:MODES] = 2.0 + 1e-3 * omega[:MODES]
    rows[:, :MODES] = 2.0 * rng.normal(size=(strikers, MODES))
    for number in range(strikers):
        rows[number, MODES + number] = -1.0 / np.sqrt(4.0)
        v[MODES + number] = 0.8 * np.sqrt(4.0)
    return {"omega": omega, "decay": decay, "rows": rows, "v": v}


def compiled(case: dict[str, np.ndarray]) -> tuple[np.ndarray, np.ndarray]:
    """The stage as the run does it: forces (k, n) and the state after them."""
    rows, count = case["rows"], len(case["rows"])
    table = coefficients(case["omega"], case["decay"], 1.0 / RATE_HZ).stacked()
    q, v, none = np.zeros_like(case["v"]), case["v"].copy(), np.zeros_like(case["v"])
    contact = np.array([[4e4] * count, [0.2 * RATE_HZ] * count])
    force, depth = np.zeros((count, STEPS)), np.zeros((count, STEPS + 1))
    march(
        q, v, table, none, rows, contact, np.zeros(count), force, depth,
        none.copy(), np.zeros(count), none.copy(), none.copy(),
    )  # fmt: skip
    return force, np.concatenate((q, v))


def plain(case: dict[str, np.ndarray]) -> tuple[np.ndarray, np.ndarray]:
    """The same steps, one numpy call an operation; the scalar equation by bracketed secants in Python."""
    rows, count = case["rows"], len(case["rows"])
    step = coefficients(case["omega"], case["decay"], 1.0 / RATE_HZ)
    w2, c, d, g = step.w2, step.c, step.d, step.g
    q, v = np.zeros_like(case["v"]), case["v"].copy()
    give = (rows * c) @ rows.T
    delta, forces, now = np.zeros(count), np.zeros((count, STEPS)), np.zeros(count)
    for at in range(STEPS):
        rest = -w2 * q
        ahead = c * rest + d * v
        free = -(rows @ ahead)
        for _ in range(60):
            before = now.copy()
            for j in range(count):
                reach = free[j] - give[j] @ now + give[j, j] * now[j]
                now[j] = _root(delta[j], reach, give[j, j])
            if count == 1 or np.max(np.abs(now - before)) <= 1e-13 * np.max(now):
                break
        pushed = now @ rows
        q = q + ahead + c * pushed
        v = v + d * (rest + pushed) - g * v
        delta += free - give @ now
        forces[:, at] = now
    return forces, np.concatenate((q, v))


def _root(delta: float, free: float, give: float) -> float:
    def push(y: float) -> float:
        later = delta + y
        if later <= 0.0 and delta <= 0.0:
            return 0.0
        if later > 0.0 and delta > 0.0:
            a, b = delta**0.5, later**0.5
            total = delta * delta + delta * a * b + delta * later + a * b * later + later * later
            slope = 0.4 * 4e4 * total / (a + b)
        else:
            slope = 0.4 * 4e4 * (max(later, 0.0) ** 2.5 - max(delta, 0.0) ** 2.5) / y
        return max(0.0, slope * (1.0 + 0.2 * RATE_HZ * y))

    high = free
    top = push(high)
    if top == 0.0:
        return 0.0
    low = free - give * top
    high_left, low_left = give * top, low - free + give * push(low)
    force = top
    for _ in range(60):
        y = high - high_left * (high - low) / (high_left - low_left)
        force = push(y)
        left = y - free + give * force
        if abs(left) < 1e-14 * (abs(free) + give * force):
            break
        if left > 0.0:
            high, high_left = y, left
        else:
            low, low_left = y, left
    return force


def best(stage: object, case: dict[str, np.ndarray], repeats: int) -> float:
    """Shortest of some runs, s."""
    taken = []
    for _ in range(repeats):
        begin = time.perf_counter()
        stage(case)  # type: ignore[operator]
        taken.append(time.perf_counter() - begin)
    return min(taken)


def main() -> int:
    """Print the ratios; 1 if the promise is not kept."""
    kept = True
    for strikers in (1, 2):
        case = setting(strikers)
        force, state = compiled(case)
        other_force, other_state = plain(case)
        force_error = np.max(np.abs(force - other_force)) / np.max(force)
        state_error = np.max(np.abs(state - other_state)) / np.max(np.abs(state))
        loaded = np.mean(force.any(axis=0))
        print(f"{strikers} striker(s), {MODES} modes, {STEPS} steps at {RATE_HZ:.0f} Hz, force in {loaded:.0%} of them")
        print(f"  answers differ by {force_error:.1e} of the largest force, {state_error:.1e} of the largest state")
        if not max(force_error, state_error) < 1e-6:
            print("  the peer does not agree: nothing is timed")
            return 1
        fast, slow = best(compiled, case, 7), best(plain, case, 2)
        real = STEPS / RATE_HZ
        print(f"  compiled {1e3 * fast:.1f} ms: {real / fast:.1f} times real time", end="")
        print(f" ({1e9 * fast / STEPS / MODES:.2f} ns a mode and step)")
        print(f"  numpy    {1e3 * slow:.1f} ms: {real / slow:.2f} times real time; ratio {slow / fast:.1f}")
        if strikers == 1:
            kept = real / fast >= PROMISED
            print(f"  promised: {PROMISED:.0f} times real time: {'kept' if kept else 'NOT KEPT'}")
    return 0 if kept else 1


if __name__ == "__main__":
    raise SystemExit(main())
