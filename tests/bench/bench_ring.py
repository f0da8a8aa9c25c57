"""Ringing by matrix products beside a bank of recursive filters, in one run on one thread.

    python tests/bench/bench_ring.py

1,000 modes for 10 s at 48 kHz, decay times spread evenly from 0.2 to 3 s. The peer is a bank of
``scipy.signal.lfilter``, one two-pole filter a mode. Answers are compared before anything is timed.
"""

from __future__ import annotations

import time
from typing import TYPE_CHECKING

import numpy as np
from scipy.signal import lfilter
from threadpoolctl import threadpool_limits

from resonate.sound.ring import ring

if TYPE_CHECKING:
    from collections.abc import Callable

MODES, SECONDS, RATE = 1000, 10, 48000.0
TOLERANCE = 1e-6


def best_s(work: Callable[[], object], repetitions: int) -> float:
    """Shortest of several runs: others share the machine."""
    times = []
    for _ in range(repetitions):
        begin = time.perf_counter()
        work()
        times.append(time.perf_counter() - begin)
    return min(times)


def main() -> None:
    """Compare, then time."""
    generator = np.random.default_rng(11)
    count = int(SECONDS * RATE)
    omega = 2.0 * np.pi * np.sort(generator.uniform(50.0, 20e3, MODES))
    decay = np.log(1000.0) / generator.permutation(np.linspace(0.2, 3.0, MODES))
    z = generator.uniform(0.1, 1.0, MODES) * np.exp(2j * np.pi * generator.uniform(size=MODES))
    pole = np.exp((-decay + 1j * np.sqrt(omega**2 - decay**2)) / RATE)
    ahead = np.stack((z.real, -(z * np.conj(pole)).real), axis=1)
    back = np.stack((np.ones(MODES), -2.0 * pole.real, np.abs(pole) ** 2), axis=1)
    impulse = np.zeros(count)
    impulse[0] = 1.0
    weights = np.ones((MODES, 1))

    def bank() -> np.ndarray:
        out = np.zeros(count)
        for numerator, denominator in zip(ahead, back, strict=True):
            out += lfilter(numerator, denominator, impulse)
        return out

    def products() -> np.ndarray:
        call = {"omega": omega, "decay": decay, "rate_hz": RATE, "count": count, "tolerance": TOLERANCE}
        return ring(z, weights, **call)[:, 0]

    with threadpool_limits(1):
        peer, ours = bank(), products()
        error = float(np.max(np.abs(ours - peer)) / np.max(np.abs(peer)))
        print(f"largest difference: {error:.2e} of the peak (at most {TOLERANCE:g} asked)")
        if not error <= TOLERANCE:
            raise SystemExit("the answers differ: nothing is timed")
        peer_s, ours_s = best_s(bank, 3), best_s(products, 15)
    print(f"bank of lfilter:    {peer_s:8.4f} s  ({SECONDS / peer_s:7.1f} x real time)")
    print(f"matrix products:    {ours_s:8.4f} s  ({SECONDS / ours_s:7.1f} x real time)")
    print(f"ratio:              {peer_s / ours_s:8.1f}  (100 asked)")


if __name__ == "__main__":
    main()
