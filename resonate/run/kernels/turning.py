"""Torque-free turning by Runge-Kutta of order 4 on a fixed step from the checkpoint."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.run.kernels.compiled import compiled

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]


@compiled
def _slope(turn: Array, spin: Array, tensor: Array, inverse: Array, turn_out: Array, spin_out: Array) -> None:
    x, y, z, w = turn[0], turn[1], turn[2], turn[3]
    a, b, c = spin[0], spin[1], spin[2]
    turn_out[0] = 0.5 * (w * a + y * c - z * b)
    turn_out[1] = 0.5 * (w * b + z * a - x * c)
    turn_out[2] = 0.5 * (w * c + x * b - y * a)
    turn_out[3] = 0.5 * (-x * a - y * b - z * c)
    l0 = tensor[0, 0] * a + tensor[0, 1] * b + tensor[0, 2] * c
    l1 = tensor[1, 0] * a + tensor[1, 1] * b + tensor[1, 2] * c
    l2 = tensor[2, 0] * a + tensor[2, 1] * b + tensor[2, 2] * c
    t0, t1, t2 = l1 * c - l2 * b, l2 * a - l0 * c, l0 * b - l1 * a
    for i in range(3):
        spin_out[i] = inverse[i, 0] * t0 + inverse[i, 1] * t1 + inverse[i, 2] * t2


@compiled
def _advance(turn: Array, spin: Array, tensor: Array, inverse: Array, h: float) -> None:
    kt, ks = np.zeros((4, 4)), np.zeros((4, 3))
    _slope(turn, spin, tensor, inverse, kt[0], ks[0])
    _slope(turn + 0.5 * h * kt[0], spin + 0.5 * h * ks[0], tensor, inverse, kt[1], ks[1])
    _slope(turn + 0.5 * h * kt[1], spin + 0.5 * h * ks[1], tensor, inverse, kt[2], ks[2])
    _slope(turn + h * kt[2], spin + h * ks[2], tensor, inverse, kt[3], ks[3])
    turn += h / 6.0 * (kt[0] + 2.0 * kt[1] + 2.0 * kt[2] + kt[3])
    spin += h / 6.0 * (ks[0] + 2.0 * ks[1] + 2.0 * ks[2] + ks[3])
    turn /= np.sqrt(np.sum(turn * turn))


@compiled
def turn_free(
    turn: Array, spin: Array, tensor: Array, inverse: Array, times: Array, step: float
) -> tuple[Array, Array]:
    """Turn (t, 4) and body-frame spin (t, 3) at ascending ``times`` after the checkpoint (may be negative)."""
    turns, spins = np.zeros((times.shape[0], 4)), np.zeros((times.shape[0], 3))
    now_turn, now_spin = turn.copy(), spin.copy()
    done = 0
    for n in range(times.shape[0]):
        if times[n] < 0.0:
            part_turn, part_spin = turn.copy(), spin.copy()
            count = int(-times[n] / step)
            for _ in range(count):
                _advance(part_turn, part_spin, tensor, inverse, -step)
            _advance(part_turn, part_spin, tensor, inverse, times[n] + count * step)
        else:
            count = int(times[n] / step)
            while done < count:
                _advance(now_turn, now_spin, tensor, inverse, step)
                done += 1
            part_turn, part_spin = now_turn.copy(), now_spin.copy()
            _advance(part_turn, part_spin, tensor, inverse, times[n] - done * step)
        turns[n] = part_turn
        spins[n] = part_spin
    return turns, spins
