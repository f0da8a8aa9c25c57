"""Torque-free turning by Taylor series, to rounding, for any inertia.

References
----------
Hairer, Norsett & Wanner, Solving Ordinary Differential Equations I (1993), sec. I.8: Taylor series methods.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.run.kernels.compiled import compiled

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

# Order of the series, and the size of its last terms relative to the first.
_ORDER = 20
_LAST = 1e-18


@compiled
def _series(slowness: Array, m: Array, w: Array, q: Array) -> None:
    for n in range(_ORDER + 1):
        for a in range(3):
            w[n, a] = slowness[a, 0] * m[n, 0] + slowness[a, 1] * m[n, 1] + slowness[a, 2] * m[n, 2]
        if n == _ORDER:
            return
        for a in range(3):
            b, e = (a + 1) % 3, (a + 2) % 3
            total, part = 0.0, 0.0
            for k in range(n + 1):
                total += m[k, b] * w[n - k, e] - m[k, e] * w[n - k, b]
                part += q[k, 3] * w[n - k, a] + q[k, b] * w[n - k, e] - q[k, e] * w[n - k, b]
            m[n + 1, a] = total / (n + 1)
            q[n + 1, a] = 0.5 * part / (n + 1)
        real = 0.0
        for k in range(n + 1):
            real -= q[k, 0] * w[n - k, 0] + q[k, 1] * w[n - k, 1] + q[k, 2] * w[n - k, 2]
        q[n + 1, 3] = 0.5 * real / (n + 1)


@compiled
def _reach(m: Array, q: Array) -> float:
    size = np.sqrt(np.sum(m[0] ** 2))
    step = np.inf
    for n in (_ORDER - 1, _ORDER):
        last = np.sqrt(np.sum(q[n] ** 2))
        if last > 0.0:
            step = min(step, (_LAST / last) ** (1.0 / n))
        last = np.sqrt(np.sum(m[n] ** 2))
        if last > 0.0:
            step = min(step, (_LAST * size / last) ** (1.0 / n))
    return step


@compiled
def _sum(series: Array, time: float, out: Array) -> None:
    out[:] = series[_ORDER]
    for n in range(_ORDER - 1, -1, -1):
        out[:] = out * time + series[n]


@compiled
def turn_free(slowness: Array, momentum: Array, turn: Array, times: Array) -> tuple[Array, Array]:
    """Turns (t, 4) and body-frame angular momenta (t, 3) at ascending times from 0 on.

    ``slowness`` (3, 3) inverse inertia tensor in the body frame; ``momentum`` (3,) in the body frame;
    ``turn`` (4,) xyzw. Solves ``L' = L x w``, ``turn' = turn w / 2`` (Euler).
    """
    out_turn, out_momentum = np.empty((len(times), 4)), np.empty((len(times), 3))
    m, w, q = np.zeros((_ORDER + 1, 3)), np.zeros((_ORDER + 1, 3)), np.zeros((_ORDER + 1, 4))
    m[0], q[0] = momentum, turn
    begin, place = 0.0, 0
    while place < len(times):
        _series(slowness, m, w, q)
        step = _reach(m, q)
        while place < len(times) and times[place] - begin <= step:
            _sum(m, times[place] - begin, out_momentum[place])
            _sum(q, times[place] - begin, out_turn[place])
            out_turn[place] /= np.sqrt(np.sum(out_turn[place] ** 2))
            place += 1
        if place < len(times):
            next_l, next_q = np.empty(3), np.empty(4)
            _sum(m, step, next_l)
            _sum(q, step, next_q)
            m[0], q[0] = next_l, next_q / np.sqrt(np.sum(next_q**2))
            begin += step
    return out_turn, out_momentum
