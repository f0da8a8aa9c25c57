"""Kinetic and potential energy of every shape against closed forms: rigid motions and uniform strains."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.linalg
from numpy.testing import assert_allclose
from scipy.sparse import csc_matrix
from scipy.sparse.linalg import splu

from tests.body import exact
from tests.body.samples import BAR, EVERY, FREE, LINES, OUTLINES, PLATES, ROD, SPRUCE, STEEL, TUBE, build, rigid

YOUNG, POISSON, DENSITY = 200e9, 0.3, 7850.0
SHEAR = YOUNG / (2.0 * (1.0 + POISSON))
# Curved rims are drawn by polynomials of the sixth degree: the area misses by a few parts in 10^9 at this mesh.
CURVED = 1e-8
STRAIGHT = 1e-12
# In pure bending the far stiffer shear cancels to nothing, which leaves some hundred times the usual rounding.
BENT = 1e-9


def tolerance(name):
    return CURVED if any(word in name for word in ("circle", "ring", "disc")) else STRAIGHT


def energy(body, field):
    """Potential energy of nodal values, J."""
    # Supports leave out freedoms; all samples here are free.
    forms = body.forms()
    return 0.5 * field @ (forms.stiffness @ field)


def asymmetry(matrix):
    return abs(matrix - matrix.T).max() / abs(matrix).max()


@pytest.mark.parametrize("name", EVERY)
def test_mass_and_stiffness_are_symmetric_and_the_mass_is_positive(name):
    forms = build(EVERY[name]).forms()

    assert asymmetry(forms.stiffness) == 0.0
    assert asymmetry(forms.mass) == 0.0
    # Gaussian elimination without exchanges meets positive pivots only, if and only if the form is positive definite
    # (Golub & Van Loan, Matrix Computations, sec. 4.2).
    pivots = splu(
        csc_matrix(forms.mass), permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0, options={"SymmetricMode": True}
    )
    assert np.array_equal(pivots.perm_r, pivots.perm_c)
    assert np.all(pivots.U.diagonal() > 0.0)


@pytest.mark.parametrize("name", FREE)
def test_rigid_motions_cost_nothing(name):
    body = build(FREE[name])
    motion = rigid(body, centre_m=body.inertia.centre_m)
    stiffness = body.forms().stiffness

    cost = np.einsum("dk,dk->k", motion, stiffness @ motion)

    # The sum of the magnitudes of what cancels; each product is rounded to 1.1e-16.
    size = np.einsum("dk,dk->k", np.abs(motion), abs(stiffness) @ np.abs(motion))
    assert np.all(np.abs(cost) < 2e-16 * size)


@pytest.mark.parametrize("name", ["bar", "tube", "wedge", "undercut bar", "rectangle plate", "kite plate", "wooden plate"])
def test_only_six_motions_cost_nothing(name):
    forms = build(FREE[name], most=4).forms()

    value = scipy.linalg.eigh(
        forms.stiffness.toarray(), forms.mass.toarray(), eigvals_only=True, subset_by_index=[0, 6]
    )

    # The first mode of these bodies lies above 20 Hz; rounding alone stays below 1 Hz.
    assert np.all(np.abs(value[:6]) < (2.0 * np.pi * 1.0) ** 2)
    assert value[6] > (2.0 * np.pi * 20.0) ** 2


@pytest.mark.parametrize("name", FREE)
@pytest.mark.parametrize("origin", [(0.0, 0.0, 0.0), (0.3, -0.2, 0.15)])
def test_kinetic_energy_of_unit_motions_is_the_inertia(name, origin):
    body = build(FREE[name])
    motion = rigid(body, centre_m=origin)

    found = motion.T @ (body.forms().mass @ motion)

    expected = exact.as_seen_from(origin, *exact.inertia(name))
    assert_allclose(found, expected, rtol=tolerance(name), atol=tolerance(name) * np.abs(expected).max())


@pytest.mark.parametrize("name", FREE)
def test_inertia_is_the_closed_form(name):
    found = build(FREE[name]).inertia
    mass, centre, tensor = exact.inertia(name)

    assert_allclose(found.mass_kg, mass, rtol=tolerance(name))
    assert_allclose(found.centre_m, centre, rtol=0.0, atol=tolerance(name))
    assert_allclose(found.tensor, tensor, rtol=tolerance(name), atol=tolerance(name) * np.abs(tensor).max())


@pytest.mark.parametrize("name", OUTLINES)
def test_mass_of_a_skin(name):
    # Pinned all round, so that the mass of the unit motion is asked of the inertia, not of the freedoms left.
    body = build(EVERY[f"{name} skin"])
    area, centre, _ = exact.outline(name)

    assert_allclose(body.inertia.mass_kg, DENSITY * 2e-4 * area, rtol=tolerance(name))
    assert_allclose(body.inertia.centre_m, [centre[0], 0.0, centre[1]], atol=tolerance(name))


# Lines.

SECTIONS = {
    # area, second moment along y, along z.
    "bar": (BAR, 0.4, 0.03 * 0.012, 0.03 * 0.012**3 / 12, 0.012 * 0.03**3 / 12),
    "rod": (ROD, 0.4, np.pi * 0.01**2, np.pi * 0.01**4 / 4, np.pi * 0.01**4 / 4),
    "tube": (
        TUBE,
        0.5,
        np.pi * (0.0125**2 - 0.011**2),
        np.pi * (0.0125**4 - 0.011**4) / 4,
        np.pi * (0.0125**4 - 0.011**4) / 4,
    ),
}


def line(body, **fields):
    """Nodal values of a line from functions of x by the name of the field."""
    x = body.grid.nodes_m[:, 0]
    values = np.zeros((len(x), 6))
    for name, function in fields.items():
        values[:, ("x", "y", "z", "rx", "ry", "rz").index(name)] = function(x)
    return values.ravel()


@pytest.mark.parametrize("name", SECTIONS)
def test_uniform_strains_of_a_line(name):
    text, length, area, up, across = SECTIONS[name]
    body = build(text)

    # E A L/2, E I L/2: any text on the strength of materials.
    stretched = energy(body, line(body, x=lambda x: x))
    bent_up = energy(body, line(body, y=lambda x: x**2 / 2, rz=lambda x: x))
    bent_across = energy(body, line(body, z=lambda x: x**2 / 2, ry=lambda x: -x))
    assert_allclose(stretched, YOUNG * area * length / 2, rtol=1e-12)
    assert_allclose(bent_up, YOUNG * up * length / 2, rtol=BENT)
    assert_allclose(bent_across, YOUNG * across * length / 2, rtol=BENT)


# Shear coefficients of Cowper, J. Appl. Mech. 33 (1966) 335, table 1, at a Poisson's ratio of 0.3, worked by hand.
SHEARED = {
    "bar": 10 * 1.3 / (12 + 11 * 0.3),
    "rod": 6 * 1.3 / (7 + 6 * 0.3),
    # Hollow circle, m = inner/outer = 0.88.
    "tube": 6 * 1.3 * (1 + 0.88**2) ** 2 / ((7 + 1.8) * (1 + 0.88**2) ** 2 + (20 + 3.6) * 0.88**2),
}


@pytest.mark.parametrize("name", SECTIONS)
@pytest.mark.parametrize("way", ["y", "z"])
def test_uniform_shear_of_a_line(name, way):
    text, length, area, _, _ = SECTIONS[name]
    body = build(text)

    found = energy(body, line(body, **{way: lambda x: x}))

    assert_allclose(found, SHEARED[name] * SHEAR * area * length / 2, rtol=1e-12)


@pytest.mark.parametrize("name", ["rod", "tube"])
def test_twist_of_a_round_line(name):
    text, length, _, up, across = SECTIONS[name]
    body = build(text)

    assert_allclose(energy(body, line(body, rx=lambda x: x)), SHEAR * (up + across) * length / 2, rtol=1e-12)


# Torsion of rectangles, J = k1 width^3 height: Timoshenko & Goodier, Theory of Elasticity, sec. 109, table of k1
# by height/width (four figures are printed).
TWISTED = [(1.0, 0.1406), (1.2, 0.166), (1.5, 0.196), (2.0, 0.229), (2.5, 0.249), (3.0, 0.263), (5.0, 0.291), (10.0, 0.312)]


@pytest.mark.parametrize("tall", [True, False])
@pytest.mark.parametrize(("ratio", "constant"), TWISTED)
def test_twist_of_a_rectangle(ratio, constant, tall):
    small = 0.01
    height, width = (ratio * small, small) if tall else (small, ratio * small)
    body = build(f'shape = "bar"\nlength = 1.0\nwidth = {width}\nheight = {height}\n{STEEL}')

    found = energy(body, line(body, rx=lambda x: x)) / (SHEAR * small**4 * ratio / 2)

    # Half of the last printed digit.
    assert abs(found - constant) <= 0.51 * (1e-4 if ratio == 1.0 else 1e-3)


def test_twist_of_a_wooden_rectangle_with_two_shear_moduli():
    # Thin strip: J -> width height^3/3 (1 - 0.63 height/width), sheared in its own plane: G12 where it lies flat (in
    # x-z), G13 where it stands (in x-y). Lekhnitskii, Theory of Elasticity of an Anisotropic Body, sec. 40 (from memory).
    thin, wide = 0.001, 0.05
    for height, width, shear, other in ((thin, wide, 0.75e9, 0.72e9), (wide, thin, 0.72e9, 0.75e9)):
        body = build(f'shape = "bar"\nlength = 1.0\nwidth = {width}\nheight = {height}\n{SPRUCE}')
        share = 1.0 - 0.630249 * thin / wide * np.sqrt(shear / other)
        assert_allclose(energy(body, line(body, rx=lambda x: x)), shear * wide * thin**3 / 3 * share / 2, rtol=1e-6)


@pytest.mark.parametrize("name", exact.PROFILES)
def test_tapers_and_undercuts(name):
    body = build(LINES[name])
    rows = exact.PROFILES[name]

    stretched = energy(body, line(body, x=lambda x: x))
    bent_up = energy(body, line(body, y=lambda x: x**2 / 2, rz=lambda x: x))
    bent_across = energy(body, line(body, z=lambda x: x**2 / 2, ry=lambda x: -x))

    assert_allclose(stretched, YOUNG / 2 * exact.along(rows, 0.4, lambda x, h, w: w * h), rtol=1e-12)
    assert_allclose(bent_up, YOUNG / 2 * exact.along(rows, 0.4, lambda x, h, w: w * h**3 / 12), rtol=BENT)
    assert_allclose(bent_across, YOUNG / 2 * exact.along(rows, 0.4, lambda x, h, w: h * w**3 / 12), rtol=BENT)


# Plates.


def flat(body, **fields):
    """Nodal values of a plate from functions of x and z by the name of the field."""
    x, z = body.grid.nodes_m.T
    values = np.zeros((len(x), 5))
    for name, function in fields.items():
        values[:, ("x", "y", "z", "rx", "rz").index(name)] = function(x, z)
    return values.ravel()


BENDING = YOUNG * 0.004**3 / 12.0


@pytest.mark.parametrize("name", OUTLINES)
def test_uniform_curvatures_of_a_plate(name):
    body = build(PLATES[f"{name} plate"])
    area = exact.outline(name)[0]
    # The parabola itself is drawn by the same polynomials; on curved elements they miss it by a little.
    rtol = 1e-6 if tolerance(name) == CURVED else 1e-9

    # Bent to a cylinder, a dome and a saddle: Timoshenko & Woinowsky-Krieger, Plates and Shells, eq. 46:
    # D/2 (kx^2 + kz^2 + 2 nu kx kz + 2 (1 - nu) kxz^2) a unit of area.
    rigidity = BENDING / (1.0 - POISSON**2)
    cylinder = energy(body, flat(body, y=lambda x, z: x**2 / 2, rz=lambda x, z: x))
    across = energy(body, flat(body, y=lambda x, z: z**2 / 2, rx=lambda x, z: -z))
    dome = energy(body, flat(body, y=lambda x, z: (x**2 + z**2) / 2, rz=lambda x, z: x, rx=lambda x, z: -z))
    saddle = energy(body, flat(body, y=lambda x, z: x * z, rz=lambda x, z: z, rx=lambda x, z: -x))
    assert_allclose(cylinder, rigidity * area / 2, rtol=rtol)
    assert_allclose(across, rigidity * area / 2, rtol=rtol)
    assert_allclose(dome, rigidity * (1.0 + POISSON) * area, rtol=rtol)
    assert_allclose(saddle, rigidity * (1.0 - POISSON) * area, rtol=rtol)


@pytest.mark.parametrize("name", OUTLINES)
def test_uniform_strains_in_the_plane_of_a_plate(name):
    body = build(PLATES[f"{name} plate"])
    volume = exact.outline(name)[0] * 0.004
    # Linear fields are drawn exactly by isoparametric elements, curved or not (Irons); the area is what misses.
    rtol = tolerance(name)

    pulled = energy(body, flat(body, x=lambda x, z: x, z=lambda x, z: -POISSON * z))
    swollen = energy(body, flat(body, x=lambda x, z: x, z=lambda x, z: z))
    sheared = energy(body, flat(body, x=lambda x, z: 0.3 * z, z=lambda x, z: 0.7 * x))
    # Uniaxial stress E; equal stress E/(1 - nu) both ways; simple shear G.
    assert_allclose(pulled, YOUNG * volume / 2, rtol=rtol)
    assert_allclose(swollen, YOUNG / (1.0 - POISSON) * volume, rtol=rtol)
    assert_allclose(sheared, SHEAR * volume / 2, rtol=rtol)


@pytest.mark.parametrize("name", OUTLINES)
def test_uniform_shear_across_a_plate(name):
    # Reissner (1945): 5/6 G h.
    body = build(PLATES[f"{name} plate"])
    stiff = 5.0 / 6.0 * SHEAR * exact.outline(name)[0] * 0.004

    assert_allclose(energy(body, flat(body, y=lambda x, z: x)), stiff / 2, rtol=tolerance(name))
    assert_allclose(energy(body, flat(body, y=lambda x, z: z)), stiff / 2, rtol=tolerance(name))


def test_a_wooden_plate_is_stiff_along_its_grain():
    # Direction 1 (E 11.6 GPa) along x, 2 (0.9 GPa) along z, 3 through the thickness. States of one stress only, so
    # that the answer is a single constant: Jones, Mechanics of Composite Materials, sec. 2.4.
    body = build(PLATES["wooden plate"])
    volume, second = 0.4 * 0.25 * 0.004, 0.4 * 0.25 * 0.004**3 / 12.0
    back = 0.37 * 0.9 / 11.6

    along = energy(body, flat(body, x=lambda x, z: x, z=lambda x, z: -0.37 * z))
    across = energy(body, flat(body, z=lambda x, z: z, x=lambda x, z: -back * x))
    sheared = energy(body, flat(body, x=lambda x, z: z))
    assert_allclose([along, across, sheared], np.array([11.6e9, 0.9e9, 0.75e9]) * volume / 2, rtol=1e-11)

    bent = {
        "y": lambda x, z: (x**2 - 0.37 * z**2) / 2,
        "rz": lambda x, z: x,
        "rx": lambda x, z: 0.37 * z,
    }
    assert_allclose(energy(body, flat(body, **bent)), 11.6e9 * second / 2, rtol=1e-8)
    slid_along, slid_across = energy(body, flat(body, y=lambda x, z: x)), energy(body, flat(body, y=lambda x, z: z))
    assert_allclose([slid_along, slid_across], np.array([0.72e9, 0.04e9]) * 5 / 6 * volume / 2, rtol=1e-11)


def test_a_wooden_bar_shears_by_the_planes_of_its_grain():
    # Sheared upward (in x-y) by G13, sideways (in x-z) by G12.
    body = build(LINES["wooden bar"])
    kappa = 10 * 1.37 / (12 + 11 * 0.37)
    volume = 0.4 * 0.03 * 0.012

    assert_allclose(energy(body, line(body, y=lambda x: x)), kappa * 0.72e9 * volume / 2, rtol=1e-11)
    assert_allclose(energy(body, line(body, z=lambda x: x)), kappa * 0.75e9 * volume / 2, rtol=1e-11)
    assert_allclose(energy(body, line(body, x=lambda x: x)), 11.6e9 * volume / 2, rtol=1e-11)


# Tension.


def test_a_string_stores_its_tension_times_the_slack_it_takes_up():
    # T/2 integral of slope^2: a sine of height A over L stores T A^2 pi^2/(4 L) (Rayleigh, vol. 1, sec. 128), and its
    # bending E I A^2 pi^4/(4 L^3).
    body = build(EVERY["string"])
    forms = body.forms()
    x = body.grid.nodes_m[:, 0]
    length, height = 0.6, 1e-3
    wave = np.pi / length
    values = np.zeros((len(x), 6))
    values[:, 1], values[:, 5] = height * np.sin(wave * x), height * wave * np.cos(wave * x)
    kept, _, _, _ = np.linalg.lstsq(forms.basis.toarray(), values.ravel(), rcond=None)

    found = 0.5 * kept @ (forms.stiffness @ kept)

    bent = YOUNG * np.pi / 64 * 0.001**4 * height**2 * wave**4 * length / 4
    assert_allclose(found, 200 * height**2 * np.pi**2 / (4 * length) + bent, rtol=1e-9)


def test_a_skin_stores_its_tension_times_the_area_it_takes_up():
    # T/2 integral of |slope|^2; on a rectangle a x b, sin sin: T pi^2 A^2 (b/a + a/b)/8 (Rayleigh, sec. 194).
    body = build(EVERY["rectangle skin"], most=60)
    forms = body.forms()
    a, b = 0.4, 0.25
    x, z = body.grid.nodes_m.T
    field = np.cos(np.pi * x / a) * np.cos(np.pi * z / b)
    kept = forms.basis.T @ field

    assert_allclose(
        0.5 * kept @ (forms.stiffness @ kept), 2000 * np.pi**2 * (b / a + a / b) / 8, rtol=1e-8
    )
    assert_allclose(kept @ (forms.mass @ kept), DENSITY * 2e-4 * a * b / 4, rtol=1e-8)


@pytest.mark.parametrize(("tension", "said"), [(30.0, False), (3e4, True)])
def test_a_string_stretched_beyond_what_any_bears_is_told(tension, said):
    # Drawn nylon breaks at a strain of some 20 % (handbook value, from memory); sigma = 4 T / (pi d^2).
    nylon = "material = {density = 1140, young = 3e9, poisson = 0.39, loss = 0.02}"
    body = build(f'shape = "string"\nlength = 0.6\ndiameter = 0.001\ntension = {tension}\n{nylon}')

    assert any("would break" in warning for warning in body.warnings) is said
