"""Frequencies against scikit-fem, a general finite-element library with elements of quite another kind.

Conforming thin-plate and Hermite beam elements know neither shear nor rotary inertia, so that the samples are thin;
solid elements know nothing of sections.
"""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
import scipy.sparse.linalg
import skfem
from skfem.helpers import dd, ddot, dot, grad

from resonate.modes.solve import solve_modes
from tests.body.exact import CORNERS
from tests.body.samples import SPRUCE, STEEL, build

YOUNG, POISSON, DENSITY = 200e9, 0.3, 7850.0
# Thickness of plates and lines beside a size of 0.3 to 0.5 m: shear and rotary inertia change the modes below by some
# (thickness/wavelength)^2, less than 1e-4.
THIN = 2e-4


def lowest(stiffness, mass, kept, count, *, rigid=0):
    """First frequencies, Hz, over the kept freedoms, without so many rigid motions."""
    stiffness, mass = stiffness[kept][:, kept].tocsc(), mass[kept][:, kept].tocsc()
    # Just below zero, so that a free body can be solved as well.
    shift = -1e-3 * (stiffness.diagonal() / mass.diagonal()).min() if rigid else 0.0
    value = scipy.sparse.linalg.eigsh(
        stiffness, count + rigid, mass, sigma=shift, return_eigenvectors=False, v0=np.ones(stiffness.shape[0])
    )
    return np.sqrt(np.sort(value)[rigid:]) / (2.0 * np.pi)


def ours(text, fields, count, *, most=60):
    """The first frequencies of the modes that move mostly in these fields, Hz."""
    body = build(text, most=most)
    modes = solve_modes(body)
    forms = body.forms()
    nodes = len(body.grid.nodes_m)
    heavy = forms.basis @ (forms.mass @ (forms.basis.T @ modes.shape))
    energy = (modes.shape * heavy).reshape(nodes, -1, modes.count).sum(axis=0)
    hz = modes.frequency_hz[np.isin(energy.argmax(axis=0), fields)]
    return hz[:count]


def agree(found, coarse, fine, *, rtol, shrink):
    """The library comes to our answer as its elements are cut: within ``rtol``, ``shrink`` times nearer than before."""
    before, after = (np.max(np.abs(theirs / found - 1.0)) for theirs in (coarse, fine))
    assert after < rtol, (after, fine / found - 1.0)
    assert after < shrink * before, (before, after)


# Lines: Hermite's cubic beam elements.

PROFILES = {
    "plain": [[0, 0.0004, 0.0006], [1, 0.0004, 0.0006]],
    "tapered": [[0, 0.0006, 0.0003], [0.5, 0.0004, 0.0005], [1, 0.0001, 0.0002]],
    "undercut": [[0, 0.0006, 0.0005], [0.3, 0.0006, 0.0005], [0.3, 0.0002, 0.0005], [0.7, 0.0002, 0.0005], [0.7, 0.0006, 0.0005], [1, 0.0006, 0.0005]],
}  # fmt: skip
ENDS = {"free": ("", 2), "cantilever": ('support = [{where = "left", hold = "clamped"}]', 0)}


@cache
def beam(name, ends, elements):
    """Bending along y, Hz."""
    rows = np.array(PROFILES[name])
    mesh = skfem.MeshLine(np.linspace(0.0, 0.4, elements + 1))
    basis = skfem.Basis(mesh, skfem.ElementLineHermite(), intorder=8)

    def size(x, column):
        # Never asked at a step itself: integration points lie inside the elements.
        after = np.searchsorted(rows[:, 0], x / 0.4)
        low, high = rows[after - 1], rows[after]
        return low[..., column] + (x / 0.4 - low[..., 0]) / (high[..., 0] - low[..., 0]) * (high - low)[..., column]

    @skfem.BilinearForm
    def bent(u, v, w):
        return YOUNG / 12.0 * size(w.x[0], 2) * size(w.x[0], 1) ** 3 * ddot(dd(u), dd(v))

    @skfem.BilinearForm
    def moved(u, v, w):
        return DENSITY * size(w.x[0], 2) * size(w.x[0], 1) * u * v

    fixed = basis.get_dofs(lambda x: x[0] == 0.0).all() if ends == "cantilever" else []
    kept = np.setdiff1d(np.arange(basis.N), fixed)
    return lowest(bent.assemble(basis), moved.assemble(basis), kept, 6, rigid=ENDS[ends][1])


@pytest.mark.parametrize("ends", ENDS)
@pytest.mark.parametrize("name", PROFILES)
def test_bars_meet_hermite_beams(name, ends):
    text = f'shape = "bar"\nlength = 0.4\nprofile = {PROFILES[name]}\n{STEEL}{ENDS[ends][0]}\n'

    found = ours(text, [1], 6)

    # Cubic elements: their error falls with the fourth power of the size; what is left is the shear.
    agree(found, beam(name, ends, 12), beam(name, ends, 120), rtol=1e-4, shrink=0.03)


# Polygons in quartic or quintic triangles.

FANS = {
    "angle": [[0, 1, 3], [1, 2, 3], [0, 3, 5], [3, 4, 5]],
    "kite": [[0, 1, 2], [0, 2, 3]],
    "pennant": [[0, 1, 3], [1, 2, 3]],
    "triangle": [[0, 1, 2]],
    "hexagon": [[0, 1, 2], [0, 2, 3], [0, 3, 4], [0, 4, 5]],
    "rectangle": [[0, 1, 2], [0, 2, 3]],
}
OUTLINES = {**CORNERS, "rectangle": [(-0.2, -0.125), (0.2, -0.125), (0.2, 0.125), (-0.2, 0.125)]}


def triangles(name, times):
    """A polygon of the samples cut in triangles by its corners, each cut in four so many times."""
    corners = np.array(OUTLINES[name], dtype=float)
    return skfem.MeshTri(corners.T.copy(), np.array(FANS[name]).T.copy()).refined(times)


def outline(name):
    return f"{{polygon = {[list(corner) for corner in OUTLINES[name]]}}}"


@skfem.BilinearForm
def product(u, v, w):
    return u * v


@skfem.BilinearForm
def slopes(u, v, w):
    return dot(grad(u), grad(v))


@cache
def skin(name, times):
    basis = skfem.Basis(triangles(name, times), skfem.ElementTriP4())
    kept = basis.complement_dofs(basis.get_dofs())
    scale = np.sqrt(2000.0 / (DENSITY * 2e-4))
    return scale * lowest(slopes.assemble(basis), product.assemble(basis), kept, 10)


# A re-entrant corner makes the slopes infinite there, so that every program converges slowly: with the power 4/3 of the
# element size at 270 degrees (Fox, Henrici & Moler 1967).
SKINS = {"kite": 2e-6, "hexagon": 2e-6, "pennant": 2e-4, "angle": 4e-4}


@pytest.mark.parametrize("name", SKINS)
def test_skins_meet_the_laplacian(name):
    text = f'shape = "membrane"\noutline = {outline(name)}\nthickness = 2e-4\ntension = 2000\n{STEEL}'

    found = ours(text, [0], 10, most=150)

    agree(found, skin(name, 2), skin(name, 4), rtol=SKINS[name], shrink=0.3)


def test_a_ring_of_skin_meets_its_radial_equation():
    # sin(n angle) u(r): integral of r u' v' + n^2/r u v, cubic elements along the radius; every n > 0 twice.
    mesh = skfem.MeshLine(np.linspace(0.06, 0.15, 21))
    basis = skfem.Basis(mesh, skfem.ElementLineP2(), intorder=8)
    kept = basis.complement_dofs(basis.get_dofs())
    weighted = skfem.BilinearForm(lambda u, v, w: w.x[0] * u * v).assemble(basis)
    expected = []
    for number in range(12):
        stiff = skfem.BilinearForm(
            lambda u, v, w, number=number: w.x[0] * dot(grad(u), grad(v)) + number**2 / w.x[0] * u * v
        ).assemble(basis)
        hz = np.sqrt(2000.0 / (DENSITY * 2e-4)) * lowest(stiff, weighted, kept, 2)
        expected.extend([*hz] * (2 if number else 1))

    found = ours(f'shape = "membrane"\noutline = {{ring = [0.3, 0.12]}}\nthickness = 2e-4\ntension = 2000\n{STEEL}', [0], 12)

    np.testing.assert_allclose(found, np.sort(expected)[:12], rtol=1e-5)


# Plates.

WOOD = {"E1": 11.6e9, "E2": 0.9e9, "G": 0.75e9, "nu": 0.37, "density": 390.0}
METAL = {"E1": YOUNG, "E2": YOUNG, "G": YOUNG / 2.6, "nu": POISSON, "density": DENSITY}
MATTER = {"steel": (STEEL, METAL), "spruce": (SPRUCE, WOOD)}


def law(matter):
    """Plane stress by inverting the compliances (3, 3), in place of any formula for the stiffnesses."""
    first, second = matter["E1"], matter["E2"]
    compliance = [[1 / first, -matter["nu"] / first, 0], [-matter["nu"] / first, 1 / second, 0], [0, 0, 1 / matter["G"]]]
    return np.linalg.inv(np.array(compliance))


def thin_plate(basis, matter, kept, count, *, rigid):
    stiff = law(matter) * THIN**3 / 12.0

    @skfem.BilinearForm
    def bent(u, v, w):
        a, b = ([dd(f)[0][0], dd(f)[1][1], 2.0 * dd(f)[0][1]] for f in (u, v))
        return sum(stiff[i, j] * a[i] * b[j] for i in range(3) for j in range(3))

    sheet = matter["density"] * THIN
    return lowest(bent.assemble(basis), sheet * product.assemble(basis), kept, count, rigid=rigid)


@cache
def argyris(name, matter, times, hold):
    """Argyris's quintic triangles, whose slopes are continuous: nothing is asked of a free edge.

    A held edge is tied by springs ten million times stiffer than the plate, which changes the modes by as little.
    """
    basis = skfem.Basis(triangles(name, times), skfem.ElementTriArgyris())
    stiff = law(MATTER[matter][1]) * THIN**3 / 12.0

    @skfem.BilinearForm
    def bent(u, v, w):
        a, b = ([dd(f)[0][0], dd(f)[1][1], 2.0 * dd(f)[0][1]] for f in (u, v))
        return sum(stiff[i, j] * a[i] * b[j] for i in range(3) for j in range(3))

    @skfem.BilinearForm
    def tied(u, v, w):
        turned = dot(grad(u), w.n) * dot(grad(v), w.n)
        return 1e7 * stiff[0, 0] * (u * v / 0.1**3 + (hold == "clamped") * turned / 0.1)

    stiffness = bent.assemble(basis)
    if hold:
        stiffness = stiffness + tied.assemble(skfem.FacetBasis(basis.mesh, basis.elem))
    sheet = MATTER[matter][1]["density"] * THIN
    every = np.arange(basis.N)
    return lowest(stiffness, sheet * product.assemble(basis), every, 8, rigid=0 if hold else 3)


PLATES = [
    ("kite", "steel", "", 1e-4),
    ("hexagon", "steel", "", 1e-4),
    # Wood shears easily across its grain: here it lowers the modes by up to 3e-4.
    ("rectangle", "spruce", "", 4e-4),
    # Re-entrant corners.
    ("pennant", "steel", "", 2e-3),
    ("angle", "steel", "", 3e-3),
    ("kite", "steel", "clamped", 1e-4),
    ("hexagon", "steel", "clamped", 1e-3),
    ("rectangle", "spruce", "clamped", 4e-4),
]


@pytest.mark.parametrize(("name", "matter", "hold", "rtol"), PLATES)
def test_plates_meet_argyris_triangles(name, matter, hold, rtol):
    support = f'support = [{{where = "edge", hold = "{hold}"}}]\n' if hold else ""
    text = f'shape = "plate"\noutline = {outline(name)}\nthickness = {THIN}\n{MATTER[matter][0]}{support}'

    found = ours(text, [1], 8, most=90 if hold else 60)

    # Three sharp corners of the kite leave its triangles long.
    fine = 4 if name == "kite" else 3
    agree(found, argyris(name, matter, 1, hold), argyris(name, matter, fine, hold), rtol=rtol, shrink=0.3)


@pytest.mark.parametrize(("name", "most"), [("triangle", 20), ("kite", 20), ("hexagon", 20), ("hexagon", 90)])
def test_pinned_plates_are_skins_squared(name, most):
    # A thin plate pinned all round an outline of straight sides moves as the skin on it does, with omega = k^2 sqrt(D/m):
    # Conway, J. Appl. Mech. 27 (1960) 275. Moments are infinite in corners wider than a right angle.
    text = f'shape = "plate"\noutline = {outline(name)}\nthickness = {THIN}\n{STEEL}'
    support = 'support = [{where = "edge", hold = "pinned"}]\n'

    found = ours(text + support, [1], 10, most=most)

    wave = 2.0 * np.pi * skin(name, 4) / np.sqrt(2000.0 / (DENSITY * 2e-4))
    expected = wave**2 * np.sqrt(YOUNG * THIN**2 / (12.0 * (1.0 - POISSON**2)) / DENSITY) / (2.0 * np.pi)
    # A mesh for 20 modes resolves the tenth by a few parts in a thousand.
    np.testing.assert_allclose(found, expected, rtol=5e-3 if most == 20 else 2e-3)


@cache
def sheet(name, matter, times):
    basis = skfem.Basis(triangles(name, times), skfem.ElementVector(skfem.ElementTriP4()))
    stiff = law(MATTER[matter][1])

    @skfem.BilinearForm
    def strained(u, v, w):
        a, b = ([grad(f)[0][0], grad(f)[1][1], grad(f)[0][1] + grad(f)[1][0]] for f in (u, v))
        return sum(stiff[i, j] * a[i] * b[j] for i in range(3) for j in range(3))

    @skfem.BilinearForm
    def moved(u, v, w):
        return MATTER[matter][1]["density"] * dot(u, v)

    return lowest(strained.assemble(basis), moved.assemble(basis), np.arange(basis.N), 6, rigid=3)


@pytest.mark.parametrize(
    ("name", "matter", "rtol"), [("kite", "steel", 1e-5), ("hexagon", "spruce", 1e-5), ("angle", "steel", 1e-3)]
)
def test_plates_in_their_own_plane_meet_plane_stress(name, matter, rtol):
    # Thick, so that these motions come early; they know nothing of the thickness.
    text = f'shape = "plate"\noutline = {outline(name)}\nthickness = 0.06\n{MATTER[matter][0]}'

    found = ours(text, [0, 2], 6)

    agree(found, sheet(name, matter, 1), sheet(name, matter, 3), rtol=rtol, shrink=0.1)


# Short bars as solids.


@cache
def solid(matter, cuts):
    """Lowest frequencies of a free block 0.2 x 0.01 (y) x 0.015 m (z) of triquadratic bricks, and what they do."""
    young, shear, poisson, density = {
        "steel": ([YOUNG] * 3, [YOUNG / 2.6] * 3, [POISSON] * 3, DENSITY),
        "spruce": ([11.6e9, 0.9e9, 0.5e9], [0.75e9, 0.72e9, 0.04e9], [0.37, 0.42, 0.47], 390.0),
    }[matter]
    # Directions 1, 2, 3 are x, z, y.
    compliance = np.zeros((6, 6))
    compliance[:3, :3] = np.diag(1.0 / np.array(young))
    for row, column, number in ((0, 1, 0), (0, 2, 1), (1, 2, 2)):
        compliance[row, column] = compliance[column, row] = -poisson[number] / young[row]
    compliance[3:, 3:] = np.diag(1.0 / np.array(shear))
    stiff = np.linalg.inv(compliance)
    mesh = skfem.MeshHex.init_tensor(
        np.linspace(0.0, 0.2, 8 * cuts + 1), np.linspace(-0.005, 0.005, cuts + 1), np.linspace(-0.0075, 0.0075, cuts + 1)
    )
    basis = skfem.Basis(mesh, skfem.ElementVector(skfem.ElementHex2()), intorder=4)

    def strain(f):
        g = grad(f)
        return [g[0][0], g[2][2], g[1][1], g[0][2] + g[2][0], g[0][1] + g[1][0], g[1][2] + g[2][1]]

    @skfem.BilinearForm
    def strained(u, v, w):
        a, b = strain(u), strain(v)
        return sum(stiff[i, j] * a[i] * b[j] for i in range(6) for j in range(6) if stiff[i, j])

    @skfem.BilinearForm
    def moved(u, v, w):
        return density * dot(u, v)

    return lowest(strained.assemble(basis), moved.assemble(basis), np.arange(basis.N), 8, rigid=6)


@pytest.mark.parametrize("matter", MATTER)
def test_short_bars_meet_solids(matter):
    text = f'shape = "bar"\nlength = 0.2\nwidth = 0.015\nheight = 0.01\n{MATTER[matter][0]}'

    found = ours(text, [0, 1, 2, 3], 8)

    # Bending both ways, twisting and stretching; the rules for sections leave out what the section itself does.
    agree(found, solid(matter, 1), solid(matter, 3), rtol=5e-3, shrink=0.3)
