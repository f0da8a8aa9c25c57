"""Loss by heat that flows across a bent body, against Zener's closed form and the exact one of a strip."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.linalg
from numpy.testing import assert_allclose
from scipy.optimize import minimize_scalar

from tests.body.samples import build

YOUNG, POISSON, DENSITY, EXPANSION, CONDUCTIVITY, CAPACITY = 70e9, 0.33, 2700.0, 23.1e-6, 237.0, 897.0
ALUMINIUM = (
    f"material = {{density = {DENSITY}, young = {YOUNG}, poisson = {POISSON}, loss = 1e-6, expansion = {EXPANSION}, "
    f"conductivity = {CONDUCTIVITY}, specific_heat = {CAPACITY}}}\n"
)
DIFFUSIVITY = CONDUCTIVITY / (DENSITY * CAPACITY)
# Zener, Phys. Rev. 52 (1937) 230: relaxation strength E alpha^2 T/(rho c).
STRENGTH = YOUNG * EXPANSION**2 * 293.15 / (DENSITY * CAPACITY)


def losses(body, fields, count=3):
    """Angular frequency (k,), rad/s, and loss factor (k,) of the first modes, free of rigid motion, in some fields."""
    forms = body.forms()
    every = body.freedoms // len(body.grid.nodes_m)
    kept = np.isin(np.arange(body.freedoms) % every, fields)
    stiffness, mass = (matrix.toarray()[np.ix_(kept, kept)] for matrix in (forms.stiffness, forms.mass))
    rigid = 3 if every == 5 else 2
    value, shape = scipy.linalg.eigh(stiffness, mass, subset_by_index=[rigid, rigid + count - 1])
    omega = np.sqrt(value)
    (heat,) = forms.heat
    x = omega * heat.relaxation_s[:, None]
    strain = heat.operator[:, np.flatnonzero(kept)] @ shape
    return omega, np.sum(strain**2 * x / (1.0 + x**2), axis=0) / value


def zener(omega, relaxation_s, strength=STRENGTH):
    x = omega * relaxation_s
    return strength * x / (1.0 + x**2)


def lifshitz_roukes(omega, height):
    """Exact loss factor of a strip: Lifshitz & Roukes, Phys. Rev. B 61 (2000) 5600, eq. 31."""
    xi = height * np.sqrt(omega / (2.0 * DIFFUSIVITY))
    return STRENGTH * (6.0 / xi**2 - 6.0 / xi**3 * (np.sinh(xi) + np.sin(xi)) / (np.cosh(xi) + np.cos(xi)))


def strip(height, length=0.4):
    return build(f'shape = "bar"\nlength = {length}\nwidth = 0.03\nheight = {height}\n{ALUMINIUM}', most=4)


@pytest.mark.parametrize("height", [0.0005, 0.001, 0.002, 0.004])
def test_strips_lose_as_zener_found(height):
    omega, found = losses(strip(height), [1, 5])

    # Slender: shear, which makes no heat, takes up to 2.6e-3 of the energy, in the third mode of the thickest.
    assert_allclose(found, zener(omega, height**2 / (np.pi**2 * DIFFUSIVITY)), rtol=3e-3)
    # One relaxation in place of all of them: within 2 % of the strength everywhere.
    exact = lifshitz_roukes(omega, height)
    assert np.all(np.abs(found - exact) < 0.02 * STRENGTH)


def test_strips_bent_edgewise_lose_by_their_width():
    body = build(f'shape = "bar"\nlength = 0.8\nwidth = 0.002\nheight = 0.01\n{ALUMINIUM}', most=4)

    omega, found = losses(body, [2, 4])

    assert_allclose(found, zener(omega, 0.002**2 / (np.pi**2 * DIFFUSIVITY)), rtol=1e-3)


def peak(body_of, fields, low, high):
    """Frequency, Hz, and loss factor where the first mode loses most as the length changes."""

    def negative(length):
        _, eta = losses(body_of(length), fields, 1)
        return -eta[0]

    best = minimize_scalar(negative, bounds=(low, high), method="bounded", options={"xatol": 1e-4})
    omega, eta = losses(body_of(best.x), fields, 1)
    return omega[0] / (2.0 * np.pi), eta[0]


def test_a_strip_loses_most_at_zeners_frequency():
    # Zener, Phys. Rev. 53 (1938) 90: f0 = pi D/(2 h^2), half the relaxation strength.
    hertz, eta = peak(lambda length: strip(0.001, round(length, 6)), [1, 5], 0.15, 0.6)

    assert_allclose(hertz, np.pi / 2.0 * DIFFUSIVITY / 0.001**2, rtol=2e-3)
    assert_allclose(eta, STRENGTH / 2.0, rtol=3e-4)
    # The exact curve peaks at xi = 2.225, where it reaches 0.494 (Lifshitz & Roukes, sec. III), 1.8 % lower in frequency.
    exact = 2.225**2 * 2.0 * DIFFUSIVITY / 0.001**2 / (2.0 * np.pi)
    assert_allclose(hertz, exact, rtol=0.02)
    assert_allclose(eta, 0.494 * STRENGTH, rtol=0.02)


def test_a_round_wire_loses_most_at_zeners_frequency():
    # Zener (1938): f0 = 2.16 D/d^2 for a wire of circular section.
    def wire(length):
        return build(f'shape = "bar"\nlength = {round(length, 6)}\ndiameter = 0.001\n{ALUMINIUM}', most=4)

    hertz, eta = peak(wire, [1, 5], 0.1, 0.5)

    assert_allclose(hertz, 2.16 * DIFFUSIVITY / 0.001**2, rtol=2e-3)
    assert_allclose(eta, STRENGTH / 2.0, rtol=3e-4)


def test_heat_runs_round_a_thin_tube():
    # cos(angle) on a ring of radius R decays as D/R^2, less 4e-3 for the shear: heat equation on a circle (Carslaw & Jaeger, sec. 4.2).
    body = build(f'shape = "tube"\nlength = 0.5\nouter = 0.0041\nwall = 0.0001\n{ALUMINIUM}', most=4)

    omega, found = losses(body, [1, 5])

    assert_allclose(found, zener(omega, 0.002**2 / DIFFUSIVITY), rtol=5e-3)


def test_a_taper_loses_slice_by_slice():
    # Bent to a uniform curvature: integral of E I x/(1 + x^2) over that of E I, each slice with its own relaxation.
    body = build(
        f'shape = "bar"\nlength = 0.4\nwidth = 0.03\nprofile = [[0, 0.001], [1, 0.003]]\n{ALUMINIUM}', most=4
    )
    x = body.grid.nodes_m[:, 0]
    field = np.zeros((len(x), 6))
    field[:, 1], field[:, 5] = x**2 / 2, x
    (heat,) = body.forms().heat
    omega = 2.0 * np.pi * 80.0
    turned = omega * heat.relaxation_s

    found = np.sum((heat.operator @ field.ravel()) ** 2 * turned / (1.0 + turned**2))

    height = 0.001 + 0.002 * (np.arange(20000) + 0.5) / 20000
    slices = YOUNG * 0.03 * height**3 / 12 * zener(omega, height**2 / (np.pi**2 * DIFFUSIVITY))
    assert_allclose(found, 0.4 * slices.mean(), rtol=1e-7)


def test_a_plate_bent_to_a_cylinder_loses_more():
    # (1 + nu)/(1 - nu) times a strip's, a dome 2/(1 - nu): the heat follows the sum of the two stresses (Norris &
    # Photiadis, Q. J. Mech. Appl. Math. 58 (2005) 143); a saddle makes none.
    body = build(f'shape = "plate"\noutline = {{rectangle = [0.4, 0.3]}}\nthickness = 0.001\n{ALUMINIUM}', most=4)
    forms = body.forms()
    (heat,) = forms.heat
    x, z = body.grid.nodes_m.T

    def share(**fields):
        values = np.zeros((len(x), 5))
        for name, value in fields.items():
            values[:, ("x", "y", "z", "rx", "rz").index(name)] = value
        field = values.ravel()
        return np.sum((heat.operator @ field) ** 2) / (field @ (forms.stiffness @ field))

    assert_allclose(heat.relaxation_s, 0.001**2 / (np.pi**2 * DIFFUSIVITY), rtol=1e-12)
    assert_allclose(share(y=x**2 / 2, rz=x), STRENGTH * (1 + POISSON) / (1 - POISSON), rtol=1e-6)
    assert_allclose(share(y=z**2 / 2, rx=-z), STRENGTH * (1 + POISSON) / (1 - POISSON), rtol=1e-6)
    assert_allclose(share(y=(x**2 + z**2) / 2, rz=x, rx=-z), STRENGTH * 2 / (1 - POISSON), rtol=1e-6)
    assert share(y=x * z, rz=z, rx=-x) < 1e-9 * STRENGTH
    # Anticlastic, as a free strip bends: one stress only, Zener's own strength.
    assert_allclose(share(y=(x**2 - POISSON * z**2) / 2, rz=x, rx=POISSON * z), STRENGTH, rtol=1e-6)


def test_twist_and_stretch_make_no_heat():
    body = strip(0.002)
    x = body.grid.nodes_m[:, 0]
    field = np.zeros((len(x), 6))
    field[:, 0], field[:, 3] = x, x
    (heat,) = body.forms().heat

    assert np.abs(heat.operator @ field.ravel()).max() < 1e-9 * np.sqrt(YOUNG)


def test_warm_bodies_lose_more():
    # The strength is proportional to the absolute temperature.
    text = f'shape = "bar"\nlength = 0.4\nwidth = 0.03\nheight = 0.002\n{ALUMINIUM}'
    cold, warm = (losses(build(text, most=4, temperature_k=kelvin), [1, 5])[1] for kelvin in (200.0, 300.0))

    assert_allclose(warm / cold, 1.5, rtol=1e-9)


def test_a_material_without_thermal_constants_has_no_such_loss():
    material = f"material = {{density = {DENSITY}, young = {YOUNG}, poisson = {POISSON}, loss = 1e-6}}\n"

    assert build(f'shape = "bar"\nlength = 0.4\nwidth = 0.03\nheight = 0.002\n{material}', most=4).forms().heat == ()
