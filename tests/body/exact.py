"""Mass, centre and moments of inertia of the sample bodies in closed form."""

from __future__ import annotations

from itertools import pairwise

import numpy as np

STEEL_KG_M3, SPRUCE_KG_M3 = 7850.0, 390.0

# Boole's rule is exact to the fifth degree (Abramowitz & Stegun, 25.4.14): a linear taper makes no more than the fourth.
BOOLE = np.array([7.0, 32.0, 12.0, 32.0, 7.0]) / 90.0
STATIONS = np.arange(5) / 4.0

# Rows of fraction, height, width of the bars whose section changes.
PROFILES = {
    "tapered bar": [(0.0, 0.02, 0.03), (0.6, 0.01, 0.02), (1.0, 0.004, 0.01)],
    "wedge": [(0.0, 0.02, 0.03), (1.0, 0.0, 0.03)],
    "undercut bar": [
        (0.0, 0.02, 0.03),
        (0.3, 0.02, 0.03),
        (0.3, 0.008, 0.03),
        (0.7, 0.008, 0.03),
        (0.7, 0.02, 0.03),
        (1.0, 0.02, 0.03),
    ],
}


def along(rows, length_m, integrand):
    """Integral over x of ``integrand(x, height, width)`` along a bar whose sides are straight between the rows."""
    total = 0.0
    for (start, h0, w0), (stop, h1, w1) in pairwise(rows):
        x = (start + STATIONS * (stop - start)) * length_m
        values = integrand(x, h0 + STATIONS * (h1 - h0), w0 + STATIONS * (w1 - w0))
        total = total + (stop - start) * length_m * np.sum(BOOLE * values, axis=-1)
    return total


def bar(rows, length_m, density):
    """Mass, centre and central tensor of a bar of rectangular section."""
    mass = density * along(rows, length_m, lambda x, h, w: h * w)
    centre = density * along(rows, length_m, lambda x, h, w: x * h * w) / mass
    swing = density * along(rows, length_m, lambda x, h, w: (x - centre) ** 2 * h * w)
    high = density * along(rows, length_m, lambda x, h, w: w * h**3 / 12.0)
    wide = density * along(rows, length_m, lambda x, h, w: h * w**3 / 12.0)
    return mass, np.array([centre, 0.0, 0.0]), np.diag([high + wide, swing + wide, swing + high])


def pipe(outer, inner, length_m, density):
    """The same of a round bar or tube: Goldstein, Classical Mechanics, or any table of moments of inertia."""
    mass = density * np.pi / 4.0 * (outer**2 - inner**2) * length_m
    turn = mass * (outer**2 + inner**2) / 8.0
    swing = mass * length_m**2 / 12.0 + turn / 2.0
    return mass, np.array([0.5 * length_m, 0.0, 0.0]), np.diag([turn, swing, swing])


def polygon(corners):
    """Area, centroid (2,) and central second moments (xx, zz, xz) of a polygon.

    Sums over the sides by Green's theorem: Steger, On the calculation of arbitrary moments of polygons (1996).
    """
    x, z = np.array(corners).T
    x1, z1 = np.roll(x, -1), np.roll(z, -1)
    cross = x * z1 - x1 * z
    area = cross.sum() / 2.0
    centre = np.array([((x + x1) * cross).sum(), ((z + z1) * cross).sum()]) / (6.0 * area)
    xx = ((x * x + x * x1 + x1 * x1) * cross).sum() / 12.0
    zz = ((z * z + z * z1 + z1 * z1) * cross).sum() / 12.0
    xz = ((x * z1 + 2 * x * z + 2 * x1 * z1 + x1 * z) * cross).sum() / 24.0
    sign = np.sign(area)
    area, xx, zz, xz = sign * area, sign * xx, sign * zz, sign * xz
    moments = (xx - area * centre[0] ** 2, zz - area * centre[1] ** 2, xz - area * centre[0] * centre[1])
    return area, centre, moments


CORNERS = {
    "triangle": [(0, 0), (0.4, 0), (0.1, 0.3)],
    "kite": [(-0.2, 0), (0, -0.1), (0.3, 0.05), (0, 0.2)],
    "angle": [(0, 0), (0.3, 0), (0.3, 0.1), (0.1, 0.1), (0.1, 0.3), (0, 0.3)],
    "pennant": [(0, 0), (0.5, 0.12), (0.02, 0.3), (0.11, 0.16)],
    "hexagon": [(0.2, 0), (0.1, 0.17), (-0.1, 0.17), (-0.2, 0), (-0.1, -0.17), (0.1, -0.17)],
}


def outline(name):
    """Area, centroid (2,) and central second moments (xx, zz, xz) of a sample outline."""
    if name == "rectangle":
        a, b = 0.4, 0.25
        return a * b, np.zeros(2), (a**3 * b / 12.0, a * b**3 / 12.0, 0.0)
    if name in ("circle", "ring"):
        outer, inner = (0.15, 0.0) if name == "circle" else (0.15, 0.06)
        second = np.pi / 4.0 * (outer**4 - inner**4)
        return np.pi * (outer**2 - inner**2), np.zeros(2), (second, second, 0.0)
    return polygon(CORNERS[name])


def signed(name, flat):
    """Signed distance (k,) of points (k, 2) from a sample outline."""
    if name in ("circle", "ring"):
        radius = np.linalg.norm(flat, axis=1)
        return np.maximum(radius - 0.15, 0.06 - radius) if name == "ring" else radius - 0.15
    corners = np.array(CORNERS.get(name, [(-0.2, -0.125), (0.2, -0.125), (0.2, 0.125), (-0.2, 0.125)]), dtype=float)
    far, inner = np.full(len(flat), np.inf), np.zeros(len(flat), dtype=bool)
    for a, b in zip(corners, np.roll(corners, -1, axis=0), strict=True):
        along = np.clip((flat - a) @ (b - a) / ((b - a) @ (b - a)), 0.0, 1.0)
        far = np.minimum(far, np.linalg.norm(flat - a - along[:, None] * (b - a), axis=1))
        rises = (a[1] > flat[:, 1]) != (b[1] > flat[:, 1])
        with np.errstate(divide="ignore", invalid="ignore"):
            inner ^= rises & (flat[:, 0] < a[0] + (flat[:, 1] - a[1]) / (b[1] - a[1]) * (b[0] - a[0]))
    return np.where(inner, -far, far)


def plate(name, thickness_m, density):
    """Mass, centre and central tensor of a plate, its thickness included."""
    area, centre, (xx, zz, xz) = outline(name)
    sheet = density * thickness_m
    turn = sheet * area * thickness_m**2 / 12.0
    tensor = np.array(
        [
            [sheet * zz + turn, 0.0, -sheet * xz],
            [0.0, sheet * (xx + zz), 0.0],
            [-sheet * xz, 0.0, sheet * xx + turn],
        ]
    )
    return sheet * area, np.array([centre[0], 0.0, centre[1]]), tensor


def inertia(name):
    """Mass, centre (3,) and central tensor (3, 3) of a free sample body."""
    if name in PROFILES:
        return bar(PROFILES[name], 0.4, STEEL_KG_M3)
    if name in ("bar", "wooden bar"):
        density = STEEL_KG_M3 if name == "bar" else SPRUCE_KG_M3
        return bar([(0.0, 0.012, 0.03), (1.0, 0.012, 0.03)], 0.4, density)
    if name in ("rod", "tube"):
        return pipe(0.02, 0.0, 0.4, STEEL_KG_M3) if name == "rod" else pipe(0.025, 0.022, 0.5, STEEL_KG_M3)
    if name in ("wooden plate", "wooden disc"):
        return plate("rectangle" if name == "wooden plate" else "circle", 0.004, SPRUCE_KG_M3)
    return plate(name.removesuffix(" plate"), 0.004, STEEL_KG_M3)


def as_seen_from(origin_m, mass, centre, tensor):
    """Mass matrix (6, 6) of a rigid body for unit motions and unit turns about a point (Huygens, Steiner)."""
    x, y, z = np.asarray(centre) - np.asarray(origin_m)
    arm = np.array([[0.0, -z, y], [z, 0.0, -x], [-y, x, 0.0]])
    both = np.zeros((6, 6))
    both[:3, :3] = mass * np.eye(3)
    both[:3, 3:] = -mass * arm
    both[3:, :3] = mass * arm
    both[3:, 3:] = tensor - mass * arm @ arm
    return both
