"""Modes by this program against plain shift-invert ``eigsh``, on the same matrices in the same run.

The answers are compared before any time is printed.

    python tests/bench/bench_modes.py            a warped plate of 5,439 freedoms, 300 modes
    python tests/bench/bench_modes.py solid      a brick of 37,125 freedoms, 100 modes (minutes)
"""

from __future__ import annotations

import sys
import time
from dataclasses import dataclass, field

import numpy as np
import scipy.sparse as sp
from numpy.polynomial import legendre
from scipy.sparse.linalg import eigsh
from threadpoolctl import threadpool_limits

from resonate.body.body import Forms
from resonate.modes.solve import solve_modes

YOUNG_PA, POISSON, DENSITY_KG_M3 = 70e9, 0.33, 2700.0


def nodes(order):
    """Gauss-Lobatto points, weights and differentiation matrix of one element on [-1, 1]."""
    basis = np.eye(order + 1)[order]
    x = np.r_[-1.0, np.sort(legendre.legroots(legendre.legder(basis)).real), 1.0]
    value = legendre.legval(x, basis)
    gap = x[:, None] - x[None, :] + np.eye(order + 1)
    slope = value[:, None] / value[None, :] / gap
    np.fill_diagonal(slope, 0.0)
    slope[0, 0], slope[-1, -1] = -order * (order + 1) / 4, order * (order + 1) / 4
    return x, 2.0 / (order * (order + 1) * value**2), slope


def line(elements, order, length_m):
    """Mass, stiffness and convection of one direction, assembled."""
    _, weight, slope = nodes(order)
    half = length_m / elements / 2
    size = elements * order + 1
    mass, stiff, first = np.zeros((3, size, size))
    for element in range(elements):
        at = slice(element * order, element * order + order + 1)
        mass[at, at] += np.diag(weight) * half
        stiff[at, at] += slope.T @ np.diag(weight) @ slope / half
        first[at, at] += np.diag(weight) @ slope
    return sp.csr_matrix(mass), sp.csr_matrix(stiff), sp.csr_matrix(first)


def plate(across=8, along=6, order=6, *, a=0.4, b=0.3, h=0.003, warp=0.15):
    """A plate with shear (Mindlin) on elements that are bent in their plane: dense 147 x 147 blocks."""
    x, weight, slope = nodes(order)
    one, count = np.eye(order + 1), (order + 1) ** 2
    by_r, by_s, weights = np.kron(slope, one), np.kron(one, slope), np.kron(weight, weight)
    bending = YOUNG_PA * h**3 / 12 / (1 - POISSON**2)
    shear = YOUNG_PA / 2 / (1 + POISSON) * h * 5 / 6
    size = 3 * (across * order + 1) * (along * order + 1)
    rows, columns, values, mass = [], [], [], np.zeros(size)
    zero, unit = np.zeros((count, count)), np.eye(count)
    unit_x, number = (x + 1) / 2, np.arange(order + 1)
    for i in range(across):
        for j in range(along):
            u, v = np.repeat((i + unit_x) / across, order + 1), np.tile((j + unit_x) / along, order + 1)
            px = a * (u + warp / 2 * np.sin(np.pi * u) * np.sin(np.pi * v))
            pz = b * (v + warp / 2 * np.sin(2 * np.pi * u) * np.sin(np.pi * v))
            xr, zr, xs, zs = by_r @ px, by_r @ pz, by_s @ px, by_s @ pz
            area = xr * zs - zr * xs
            dx = (zs[:, None] * by_r - zr[:, None] * by_s) / area[:, None]
            dz = (xr[:, None] * by_s - xs[:, None] * by_r) / area[:, None]
            kx, kz = np.hstack([zero, dx, zero]), np.hstack([zero, zero, dz])
            twist = np.hstack([zero, dz, dx])
            gx, gz = np.hstack([dx, unit, zero]), np.hstack([dz, zero, unit])
            w = (weights * area)[:, None]
            block = bending * (kx.T @ (w * (kx + POISSON * kz)) + kz.T @ (w * (kz + POISSON * kx)))
            block += bending * (1 - POISSON) / 2 * twist.T @ (w * twist)
            block += shear * (gx.T @ (w * gx) + gz.T @ (w * gz))
            node = ((i * order + number)[:, None] * (along * order + 1) + j * order + number).ravel()
            freedom = np.concatenate([3 * node, 3 * node + 1, 3 * node + 2])
            rows.append(np.repeat(freedom, 3 * count))
            columns.append(np.tile(freedom, 3 * count))
            values.append(((block + block.T) / 2).ravel())
            heavy = DENSITY_KG_M3 * weights * area
            np.add.at(mass, freedom, np.concatenate([h * heavy, h**3 / 12 * heavy, h**3 / 12 * heavy]))
    stiffness = sp.csr_matrix(
        (np.concatenate(values), (np.concatenate(rows), np.concatenate(columns))), shape=(size, size)
    )
    return sp.csr_matrix((stiffness + stiffness.T) / 2), sp.csr_matrix(sp.diags(mass)), 300


def solid():
    """A free brick, 0.16 x 0.12 x 0.07 m, of quadratic elements."""
    parts = [line(16, 2, 0.16), line(12, 2, 0.12), line(7, 2, 0.07)]
    lame, shear = YOUNG_PA * POISSON / (1 + POISSON) / (1 - 2 * POISSON), YOUNG_PA / 2 / (1 + POISSON)

    def product(left, right):
        """Integral of (d u / d left) (d v / d right) over the brick."""
        factors = []
        for axis, (mass, stiff, first) in enumerate(parts):
            both = (axis == left) + 2 * (axis == right)
            factors.append((mass, first.T, first, stiff)[both])
        return sp.kron(sp.kron(factors[0], factors[1]), factors[2])

    laplace = shear * sum(product(axis, axis) for axis in range(3))
    blocks = [
        [lame * product(i, j) + shear * product(j, i) + (i == j) * laplace for j in range(3)]
        for i in range(3)
    ]
    volume = sp.kron(sp.kron(parts[0][0], parts[1][0]), parts[2][0])
    size = volume.shape[0]
    order = np.arange(3 * size).reshape(3, size).T.ravel()
    stiffness = sp.csr_matrix(sp.bmat(blocks))[order][:, order]
    mass = sp.csr_matrix(DENSITY_KG_M3 * sp.block_diag([volume] * 3))[order][:, order]
    stiffness = sp.csr_matrix((stiffness + stiffness.T) / 2)
    stiffness.eliminate_zeros()
    return stiffness, mass, 100


@dataclass(frozen=True)
class Bands:
    """Everything up to any frequency, within a budget."""

    most: int
    heard_hz: float = 1e6
    solved_hz: float | None = None


@dataclass
class MatrixBody:
    """What the solver asks of a body."""

    stiffness: sp.csr_matrix
    mass: sp.csr_matrix
    bands: Bands
    name: str = "hatch cover"
    key: str = "bench"
    held: bool = False
    free: bool = False
    loss: tuple[tuple[float, float], ...] = ((1.0, 0.0),)
    warnings: tuple[str, ...] = ()
    freedoms: int = field(init=False)

    def __post_init__(self):
        self.freedoms = self.stiffness.shape[0]

    def forms(self):
        """Ready already."""
        return Forms(
            stiffness=self.stiffness,
            mass=self.mass,
            basis=sp.csr_matrix(sp.identity(self.freedoms)),
            cords=None,
            springs=None,
            damper_rows=sp.csr_matrix((0, self.freedoms)),
            damper_ns_m=np.zeros(0),
            heat=(),
        )


def timed(action):
    """Result and seconds."""
    begin = time.perf_counter()
    result = action()
    return result, time.perf_counter() - begin


def main(which="plate"):
    """Compare, then print."""
    stiffness, mass, most = solid() if which == "solid" else plate()
    body = MatrixBody(stiffness, mass, Bands(most=most))
    with threadpool_limits(limits=1):
        modes, ours_s = timed(lambda: solve_modes(body))
        count = modes.count + modes.rigid.shape[1]
        # The usual small negative shift, here at a fifth of the first mode.
        shift = -((modes.omega[0] / 5) ** 2)
        (value, _), plain_s = timed(lambda: eigsh(stiffness, count, mass, sigma=shift))
    plain = np.sqrt(np.sort(value)[modes.rigid.shape[1] :])
    worst = np.max(np.abs(plain / modes.omega - 1.0))
    assert worst < 1e-6, f"the answers differ by {worst:.2g}"
    print(f"{which}: {body.freedoms} freedoms, {stiffness.nnz / body.freedoms:.0f} entries a row")
    print(f"  {modes.rigid.shape[1]} rigid motions, {modes.count} modes to {modes.frequency_hz[-1]:.0f} Hz")
    print(f"  frequencies agree to {worst:.1e}; largest residual {np.max(modes.residual):.1e}")
    print(f"  plain eigsh {plain_s:.2f} s, solve_modes {ours_s:.2f} s: {plain_s / ours_s:.1f} times")


if __name__ == "__main__":
    main(*sys.argv[1:])
