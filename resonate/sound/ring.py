"""Free ringing in closed form, by matrix products.

A sum of decaying modes at the times ``n / rate`` factorises: with n = j L + k,
``exp(lambda n) = exp(lambda j L) exp(lambda k)``. One small matrix holds the near times k, one the
far times j, and a real matrix product of the two gives all samples without one exponential each.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.errors import ResonateError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    ComplexArray = NDArray[np.complex128]

# Near times of a block and blocks of a slab: 256 samples by 48, about a quarter of a second at
# 48 kHz. Long enough for an efficient product, short enough to let dead modes go.
NEAR = 256
FAR = 48
# Modes whose near times are built at once, so that they stay in the cache.
TILE = 64
# The rest of the tolerance is left to rounding.
SPARE = 0.99


def ring(
    z: ComplexArray,
    weights: ComplexArray,
    *,
    omega: Array,
    decay: Array,
    rate_hz: float,
    count: int,
    tolerance: float = 1e-6,
    peak: Array | None = None,
) -> Array:
    """Sum freely decaying modes at uniform times.

    Sample n of channel c is ``sum_i Re[weights[i, c] z[i] exp(lambda_i n / rate_hz)]`` with
    ``lambda = -decay + j sqrt(omega^2 - decay^2)``.

    Parameters
    ----------
    z : ComplexArray
        (m,) modal state at sample 0.
    weights : ComplexArray
        (m, c) what each channel takes of each mode.
    omega, decay : Array
        (m,) undamped angular frequencies, rad/s, and decay rates, 1/s.
    rate_hz : float
        Sample rate, Hz.
    count : int
        Number of samples.
    tolerance : float
        What may be left out, as a share of the peak of each channel; 0 keeps every mode to the end.
    peak : Array, optional
        (c,) magnitude that each channel is known to reach; found from the first slab if not given.

    Returns
    -------
    Array
        (count, c).

    Raises
    ------
    ResonateError
        If the lengths differ, or a mode does not swing (``decay >= omega``).

    Notes
    -----
    At the start of each slab the modes that die first are dropped as long as their amplitudes
    sum to at most ``tolerance`` times the peak. Amplitudes only fall, so the error of no sample
    exceeds that.
    """
    rates = exponents(omega, decay)
    amplitudes = np.asarray(z)[:, None] * weights
    if amplitudes.shape[0] != len(rates):
        raise ResonateError(
            what=f"{amplitudes.shape[0]} states for {len(rates)} modes",
            where="ring",
            fix="give one state and one row of weights for each mode",
        )
    near = int(min(NEAR, max(1, 2 ** round(np.log2(max(count, 1)) / 2.0))))
    order = _last_to_die(amplitudes, decay)
    blocks = _ring(
        amplitudes[order].T.copy(),
        rates[order] / rate_hz,
        near=near,
        count=count,
        tolerance=tolerance,
        peak=peak,
    )
    return np.ascontiguousarray(blocks.reshape(len(blocks), -1)[:, :count].T)


def exponents(omega: Array, decay: Array) -> ComplexArray:
    """Exponents lambda (m,), 1/s, of modes that swing.

    Raises
    ------
    ResonateError
        If a mode is damped so strongly that it does not swing.
    """
    square = np.asarray(omega) ** 2 - np.asarray(decay) ** 2
    if np.any(square <= 0.0):
        first = int(np.argmax(square <= 0.0))
        raise ResonateError(
            what=f"mode {first + 1} decays at {decay[first]:.4g} 1/s, faster than it swings",
            where="modes",
            fix="lower the loss factor or the damper until the decay rate is below the angular frequency",
        )
    return np.asarray(-decay + 1j * np.sqrt(square), dtype=np.complex128)


def powers(steps: ComplexArray, count: int) -> ComplexArray:
    """Powers 0 to ``count - 1`` of each step (m,) by repeated doubling: (count, m)."""
    table = np.empty((count, len(steps)), dtype=np.complex128)
    table[0] = 1.0
    done, leap = 1, np.array(steps)
    while done < count:
        more = min(done, count - done)
        np.multiply(table[:more], leap, out=table[done : done + more])
        done, leap = done + more, leap * leap
    return table


def _last_to_die(amplitudes: ComplexArray, decay: Array) -> NDArray[np.intp]:
    # Longest audible modes first, so that the living ones are always a leading slice.
    scale = np.sqrt(np.sum(np.abs(amplitudes) ** 2, axis=0))
    share = np.max(np.abs(amplitudes) / np.where(scale > 0.0, scale, 1.0), axis=1, initial=0.0)
    with np.errstate(divide="ignore", invalid="ignore"):
        life = np.log(np.maximum(share * 1e9, 1.0)) / decay
    return np.argsort(-np.nan_to_num(life, nan=0.0), kind="stable")


def _ring(
    now: ComplexArray, step: ComplexArray, *, near: int, count: int, tolerance: float, peak: Array | None
) -> Array:
    # now (c, m) amplitudes, step (m,) exponents per sample; returns (c, blocks, near).
    channels, alive = now.shape
    columns = -(-count // near)
    out = np.zeros((channels, columns, near))
    rows = _rows(step, near)
    far = powers(np.exp(step * near), min(FAR, max(columns, 1)))
    slab = np.exp(step * (near * FAR))
    allowed = None if peak is None else SPARE * tolerance * np.asarray(peak)
    for begin in range(0, columns, FAR):
        if allowed is not None and tolerance > 0.0:
            alive = _living(now, allowed)
            now = now[:, :alive]
        if alive == 0:
            break
        width = min(FAR, columns - begin)
        for state, block in zip(now, out[:, begin : begin + width], strict=True):
            # A complex row is its real and imaginary parts side by side, as the rows are.
            np.matmul((far[:width, :alive] * state).view(np.float64), rows[: 2 * alive], out=block)
        if allowed is None:
            allowed = SPARE * tolerance * np.max(np.abs(out[:, :width]), axis=(1, 2))
        now = now * slab[:alive]
    return out


def _rows(step: ComplexArray, near: int) -> Array:
    # (2 m, near): real and minus imaginary part of exp(lambda k), mode by mode.
    rows = np.empty((len(step), 2, near))
    table = np.empty((TILE, near), dtype=np.complex128)
    for begin in range(0, len(step), TILE):
        leap = np.exp(step[begin : begin + TILE])[:, None]
        part = table[: len(leap)]
        part[:, 0] = 1.0
        done = 1
        while done < near:
            more = min(done, near - done)
            np.multiply(part[:, :more], leap, out=part[:, done : done + more])
            done, leap = done + more, leap * leap
        rows[begin : begin + TILE, 0] = part.real
        np.negative(part.imag, out=rows[begin : begin + TILE, 1])
    return rows.reshape(-1, near)


def _living(now: ComplexArray, allowed: Array) -> int:
    # How many leading modes must stay so that the rest sums to at most what each channel allows.
    alive = 0
    for rest, most in zip(np.cumsum(np.abs(now[:, ::-1]), axis=1), allowed, strict=True):
        alive = max(alive, len(rest) - int(np.searchsorted(rest, most, side="right")))
    return alive
