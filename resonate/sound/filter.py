"""The band limit: one linear-phase low-pass, in continuous time.

The run knows the pressure as a function of continuous time. Delivery samples are taken from its
convolution with a short kernel, at whatever times the delivery asks for; no rate has to divide another.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from resonate.errors import ResonateError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    ComplexArray = NDArray[np.complex128]

# Far beyond what is heard, so that cutting the kernel off leaves no step above 1e-11.
ATTENUATION_DB = 220.0
PASS_HZ = 20_000.0
# Widest share of the delivery rate that passes, and how much room the flank takes above it.
PASS_SHARE = 5.0 / 12.0
FLANK = 1.4
# Relative error of the quadrature over a cell.
QUADRATURE = 1e-14


@dataclass(frozen=True, slots=True)
class BandLimit:
    """Kaiser-windowed sinc g(t): unity up to ``pass_hz``, nothing from ``stop_hz`` on.

    References
    ----------
    Kaiser, Nonrecursive digital filter design using the I0-sinh window function, ISCAS (1974).
    Oppenheim & Schafer, Discrete-Time Signal Processing 3rd ed. (2010), section 7.5.3.
    """

    pass_hz: float
    stop_hz: float

    def __post_init__(self) -> None:
        """Check the order of the edges."""
        if not 0.0 < self.pass_hz < self.stop_hz:
            raise ResonateError(
                what=f"a band limit that passes {self.pass_hz} Hz and stops {self.stop_hz} Hz",
                where="sound",
                fix="let the pass edge lie above zero and below the stop edge",
            )

    @property
    def half_s(self) -> float:
        """Half the length of the kernel, s."""
        flank = 2.0 * np.pi * (self.stop_hz - self.pass_hz)
        return float((ATTENUATION_DB - 7.95) / (2.285 * flank) / 2.0)

    @property
    def shape(self) -> float:
        """Kaiser's shape parameter for the attenuation."""
        return 0.1102 * (ATTENUATION_DB - 8.7)

    def kernel(self, offset_s: Array) -> Array:
        """Evaluate the kernel g, 1/s, at any offsets."""
        from scipy.special import i0

        cut = self.pass_hz + self.stop_hz
        inside = 1.0 - (offset_s / self.half_s) ** 2
        window = i0(self.shape * np.sqrt(np.maximum(inside, 0.0))) / i0(self.shape)
        return np.where(inside >= 0.0, cut * np.sinc(cut * offset_s) * window, 0.0)

    def slope(self, offset_s: Array) -> Array:
        """Evaluate the derivative of the kernel, 1/s^2, at any offsets."""
        from scipy.special import i0, i1

        cut = self.pass_hz + self.stop_hz
        inside = 1.0 - (offset_s / self.half_s) ** 2
        root = self.shape * np.sqrt(np.maximum(inside, 0.0))
        # i1(x) / x continues to 1/2 where the window ends, (cos x - sin x / x) / x to 0 in the middle.
        ratio = np.where(root > 0.0, i1(root) / np.where(root > 0.0, root, 1.0), 0.5)
        window_slope = -((self.shape / self.half_s) ** 2) * offset_s * ratio
        angle = np.pi * cut * offset_s
        safe = np.where(angle != 0.0, angle, 1.0)
        sinc_slope = np.where(angle != 0.0, np.pi * cut * (np.cos(angle) - np.sin(safe) / safe) / safe, 0.0)
        both = np.sinc(cut * offset_s) * window_slope + sinc_slope * i0(root)
        return np.where(inside >= 0.0, cut * both / i0(self.shape), 0.0)

    def gain(self, exponent: ComplexArray) -> ComplexArray:
        """Gain on ``exp(exponent * t)``: the kernel's transform ``integral g(u) exp(-exponent u) du``.

        Parameters
        ----------
        exponent : ComplexArray
            (m,) lambda = -decay + j omega, 1/s.

        Returns
        -------
        ComplexArray
            (m,) complex gains; 1 within 1e-10 in the pass band for slow decays.
        """
        top_hz = float(np.max(np.abs(exponent.imag), initial=0.0)) / (2.0 * np.pi)
        # Kernel and mode together turn at most twice in a panel; 16 points carry that to 1e-19.
        nodes, weights = _panels(self.half_s, int(np.ceil(0.5 * self.half_s * (self.stop_hz + top_hz))))
        values = weights * self.kernel(nodes)
        gains = np.empty(len(exponent), dtype=np.complex128)
        for begin in range(0, len(exponent), 256):
            part = slice(begin, begin + 256)
            gains[part] = 2.0 * (np.cosh(exponent[part, None] * nodes) @ values)
        return gains


def band_limit(rate_hz: float, *, heard_hz: float) -> BandLimit:
    """Choose the band limit of a delivery rate.

    What lies between pass and stop folds back above the pass edge only. At 48 kHz: 20 to 28 kHz; at
    44.1 kHz: 20 to 24.1 kHz; higher rates widen it if more is heard.

    Parameters
    ----------
    rate_hz : float
        Delivery rate, Hz (44.1 kHz or more).
    heard_hz : float
        Highest frequency that any body lets be heard, Hz.
    """
    widest = max(PASS_SHARE * rate_hz, PASS_HZ)
    pass_hz = min(max(heard_hz, PASS_HZ), widest)
    return BandLimit(pass_hz, min(rate_hz - pass_hz, FLANK * pass_hz))


@dataclass(frozen=True, slots=True)
class Grid:
    """Uniform delivery times: ``first_s + n / rate_hz`` for n below ``count``."""

    first_s: float
    rate_hz: float
    count: int


def deliver(limit: BandLimit, values: Array, *, nodes_s: Array, grid: Grid) -> Array:
    """Sum kernels at uniform delivery times: ``out[n] = sum_k g(first + n / rate - node_k) values[k]``.

    Parameters
    ----------
    limit : BandLimit
        The band limit.
    values : Array
        (k, c) quadrature weight times signal at the nodes.
    nodes_s : Array
        (k,) ascending times of the nodes, s.
    grid : Grid
        Delivery times.

    Returns
    -------
    Array
        (count, c).

    Notes
    -----
    All samples see a node at the same fraction of a sample, so one table row (all taps at that
    fraction, cubic Hermite between tabulated fractions, 1e-12 of the peak) serves them all.
    """
    table = _table(limit, grid.rate_hz)
    reach, count = table.reach, grid.count
    place = (nodes_s - grid.first_s) * grid.rate_hz
    use = (place > -reach - 1) & (place < count + reach)
    place, values = place[use], values[use]
    base = np.floor(place).astype(np.int64)
    rows = _rows(table, place - base)
    out = np.zeros((count + 4 * reach + 4, values.shape[1]))
    edges = np.concatenate(([0], np.flatnonzero(np.diff(base)) + 1, [len(base)]))
    for begin, end in pairwise(edges):
        if end > begin:
            start = int(base[begin]) + reach + 1
            out[start : start + rows.shape[1]] += rows[begin:end].T @ values[begin:end]
    return out[2 * reach + 1 : 2 * reach + 1 + count]


@dataclass(frozen=True, slots=True)
class _Table:
    # values[p, t] = g((t - reach - p / phases) / rate), slopes the same per phase.
    values: Array
    slopes: Array
    phases: int
    reach: int


@lru_cache(maxsize=4)
def _table(limit: BandLimit, rate_hz: float) -> _Table:
    # Cubic Hermite errs by (angular frequency * step)^4 / 384, averaged over the band / 5.
    step_s = 6e-3 / (2.0 * np.pi * limit.stop_hz)
    phases = int(np.ceil(1.0 / (rate_hz * step_s)))
    reach = int(np.ceil(limit.half_s * rate_hz))
    taps = np.arange(-reach, reach + 2)
    offsets = (taps - np.arange(phases + 1)[:, None] / phases) / rate_hz
    return _Table(limit.kernel(offsets), -limit.slope(offsets) / (phases * rate_hz), phases, reach)


def _rows(table: _Table, fraction: Array) -> Array:
    place = fraction * table.phases
    cell = np.minimum(place.astype(np.int64), table.phases - 1)
    u = (place - cell)[:, None]
    rest = 1.0 - u
    rows = table.values[cell] * (rest * rest * (1.0 + 2.0 * u))
    rows += table.slopes[cell] * (rest * rest * u)
    rows += table.values[cell + 1] * (u * u * (1.0 + 2.0 * rest))
    rows -= table.slopes[cell + 1] * (u * u * rest)
    return rows


def cell_rule(width_s: float, top_hz: float) -> tuple[Array, Array]:
    """Gauss-Legendre rule on ``[0, width]`` that carries ``exp(j 2 pi top t)`` to 1e-14.

    The error bound is that of Davis & Rabinowitz, Methods of Numerical Integration 2nd ed. (1984),
    section 2.7, relative to the width.

    Returns
    -------
    tuple[Array, Array]
        Nodes, s, and weights, s.
    """
    square = (2.0 * np.pi * top_hz * width_s) ** 2
    points, error = 1, square / 24.0
    while error > QUADRATURE:
        points += 1
        even, odd = 2 * points, 2 * points - 1
        error *= square * points**4 * odd / ((even + 1) * (even * odd) ** 3)
    nodes, weights = _legendre(points)
    return 0.5 * width_s * (nodes + 1.0), 0.5 * width_s * weights


@lru_cache(maxsize=64)
def _legendre(points: int) -> tuple[Array, Array]:
    nodes, weights = np.polynomial.legendre.leggauss(points)
    return nodes, weights


def _panels(length_s: float, panels: int) -> tuple[Array, Array]:
    # Gauss-Legendre nodes and weights on [0, length], 16 a panel.
    nodes, weights = _legendre(16)
    width = length_s / panels
    begins = width * np.arange(panels)
    every = (begins[:, None] + 0.5 * width * (nodes + 1.0)).ravel()
    return every, np.tile(0.5 * width * weights, panels)
