"""Decay rates against closed forms and published examples."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.sparse as sp

from resonate.body.body import HeatForm
from resonate.errors import ModesError
from resonate.modes.decay import loss_factor, thermoelastic_loss
from resonate.modes.solve import solve_modes

TWO_PI = 2.0 * np.pi

# T60 of a mode from its loss factor: T60 = ln(1000) / (pi f eta) = 2.2 / (f eta).
# Cremer & Heckl, Structure-Borne Sound (Springer 1988); the factor 2.2 is 2.19880679664.
T60 = [(440.0, 0.001, 4.99728817), (2000.0, 0.0001, 10.994034), (250.0, 0.02, 0.439761359)]

# Thermoelastic loss of a thin beam in bending, Zener (1937, 1938), Phys. Rev. 52, 230 and 53, 90:
# eta = D x / (1 + x^2), D = E alpha^2 T / (rho c), x = w tau, tau = h^2 rho c / (pi^2 k).
# (material, E, rho, alpha, k, c, h, f, D, peak Hz, loss at f); constants from memory (handbook
# values), T = 293.15 K; results computed from the closed form apart from this program.
ZENER = [
    ("aluminium", 70e9, 2700, 2.31e-5, 237, 897, 3e-3, 500.0, 0.004521221, 17.079278, 0.00015425837),
    ("silicon", 160e9, 2330, 2.6e-6, 148, 700, 1e-5, 1e6, 0.0001944028, 1425370.1, 9.1400152e-05),
]


def resonator(make, hertz, **options):
    """One kilogram on one spring."""
    stiffness = sp.csr_matrix([[(TWO_PI * hertz) ** 2]])
    return make.Body(stiffness, sp.csr_matrix([[1.0]]), **options)


@pytest.mark.parametrize(("hertz", "eta", "seconds"), T60)
def test_material_loss_gives_the_published_t60(make, hertz, eta, seconds):
    modes = solve_modes(resonator(make, hertz, loss=((1000.0, eta),)))

    # Nine digits are given.
    np.testing.assert_allclose(modes.t60_s, [seconds], rtol=2e-9)
    # 27.2875270768 eta f decibels each second; the same source.
    np.testing.assert_allclose(modes.decay.total * 20 / np.log(10), 27.2875270768 * eta * hertz, rtol=1e-10)


def test_rayleigh_damping_passes_through_its_two_points(make):
    # zeta = alpha / (2 w) + beta w / 2 with zeta = 0.005 at 200 and 2000 Hz, from any text on
    # structural dynamics; alpha = 11.4239733, beta = 7.2343156e-07; minimum 0.0028747979 at 632 Hz,
    # 0.018295455 at 8 kHz. A dashpot to ground on every mass is alpha, one in every spring is beta.
    alpha, beta = 11.4239733, 7.2343156e-07
    stiffness, mass = make.chain(30, spring_n_m=1e9)
    strain = sp.csr_matrix(sp.diags([np.ones(30), -np.ones(30)], [0, -1], shape=(31, 30)))
    rows = sp.vstack([sp.identity(30), strain])
    dampers = np.r_[np.full(30, alpha), np.full(31, beta * 1e9)]

    modes = solve_modes(make.Body(stiffness, mass, damper_rows=sp.csr_matrix(rows), damper_ns_m=dampers))

    zeta = modes.decay.support / modes.omega
    np.testing.assert_allclose(zeta, alpha / (2 * modes.omega) + beta * modes.omega / 2, rtol=1e-9)
    checks = {200.0: 0.005, 2000.0: 0.005, 632.0: 0.0028747979, 8000.0: 0.018295455}
    for hertz, expected in checks.items():
        one = resonator(
            make,
            hertz,
            damper_rows=sp.csr_matrix([[1.0], [TWO_PI * hertz]]),
            damper_ns_m=np.array([alpha, beta]),
        )
        found = solve_modes(one).decay.support[0] / (TWO_PI * hertz)
        # 632 Hz stands for the geometric mean, 632.456 Hz, where the curve is flat.
        assert found == pytest.approx(expected, rel=1e-6)


def bending(alpha, young, density, conductivity, heat, thickness_m):
    strength = young * alpha**2 * 293.15 / (density * heat)
    return strength, thickness_m**2 * density * heat / (np.pi**2 * conductivity)


@pytest.mark.parametrize("row", ZENER, ids=lambda row: row[0])
def test_thermoelastic_loss_is_zeners(make, row):
    _, young, density, alpha, conductivity, heat, thickness_m, hertz, strength, peak_hz, loss = row
    relaxation, tau_s = bending(alpha, young, density, conductivity, heat, thickness_m)
    assert relaxation == pytest.approx(strength, rel=1e-6)
    assert 1 / (TWO_PI * tau_s) == pytest.approx(peak_hz, rel=1e-6)

    def form(at_hz):
        # All strain energy is in bending: (C phi)^2 = strength * phi K phi.
        return HeatForm(
            operator=sp.csr_matrix([[np.sqrt(relaxation) * TWO_PI * at_hz]]), relaxation_s=np.array([tau_s])
        )

    modes = solve_modes(resonator(make, hertz, heat=(form(hertz),)))
    peak = solve_modes(resonator(make, peak_hz, heat=(form(peak_hz),)))

    np.testing.assert_allclose(modes.decay.thermoelastic, 0.5 * loss * TWO_PI * hertz, rtol=1e-6)
    # At the peak half the relaxation strength is lost.
    np.testing.assert_allclose(peak.decay.thermoelastic, 0.25 * strength * TWO_PI * peak_hz, rtol=1e-6)
    np.testing.assert_array_equal(modes.decay.material, [0.0])


def test_thermoelastic_loss_adds_up_over_samples_and_forms(make):
    stiffness, mass = make.chain(12)
    modes = solve_modes(make.Body(stiffness, mass))
    strain = sp.csr_matrix(sp.diags([np.ones(12), -np.ones(12)], [0, -1], shape=(13, 12)))
    # The springs carry all energy, so equal relaxation gives the plain Debye peak for every mode.
    forms = tuple(
        HeatForm(operator=np.sqrt(0.02) * strain[part], relaxation_s=np.full(strain[part].shape[0], 0.7))
        for part in (slice(0, 5), slice(5, 13))
    )

    eta = thermoelastic_loss(forms, modes.shape, modes.omega)

    turn = 0.7 * modes.omega
    np.testing.assert_allclose(eta, 0.02 * turn / (1 + turn**2), rtol=1e-10)


def test_loss_factor_is_interpolated_over_log_frequency():
    points = ((100.0, 0.01), (1000.0, 0.03), (10_000.0, 0.02))

    found = loss_factor(points, np.array([1.0, 100.0, np.sqrt(1e5), 1000.0, np.sqrt(1e7), 1e6]))

    np.testing.assert_allclose(found, [0.01, 0.01, 0.02, 0.03, 0.025, 0.02], rtol=1e-12)


@pytest.mark.parametrize(
    "points", [(), ((0.0, 0.1), (10.0, 0.2)), ((10.0, 0.1), (5.0, 0.1)), ((10.0, -0.1),), ((10.0, np.nan),)]
)
def test_bad_loss_points_are_refused(points):
    with pytest.raises(ModesError, match="loss factor points"):
        loss_factor(points, np.array([100.0]))


def test_constant_loss_needs_no_meaningful_frequency():
    np.testing.assert_array_equal(loss_factor(((0.0, 0.01),), np.array([5.0, 500.0])), [0.01, 0.01])


def test_support_loss_is_the_work_of_the_dashpot(make):
    # One mass, one dashpot: exact decay of an underdamped oscillator is c / (2 m).
    body = make.Body(
        sp.csr_matrix([[50.0]]),
        sp.csr_matrix([[2.0]]),
        damper_rows=sp.csr_matrix([[1.0]]),
        damper_ns_m=np.array([3.0]),
    )

    np.testing.assert_allclose(solve_modes(body).decay.support, [3.0 / 4.0], rtol=1e-12)


def test_small_support_loss_agrees_with_the_damped_eigenvalues(make):
    # First order in the damping: compare with the complex eigenvalues of the quadratic pencil.
    stiffness, mass = make.chain(8)
    row = np.zeros((1, 8))
    row[0, 0] = 1.0  # no mode has a node there
    body = make.Body(stiffness, mass, damper_rows=sp.csr_matrix(row), damper_ns_m=np.array([1e-4]))

    rate = solve_modes(body).decay.support

    zero, one = np.zeros((8, 8)), np.eye(8)
    state = np.block([[zero, one], [-stiffness.toarray(), -1e-4 * row.T @ row]])
    value = np.linalg.eigvals(state)
    value = value[value.imag > 0]
    np.testing.assert_allclose(rate, -value.real[np.argsort(value.imag)], rtol=1e-6)


def test_dashpot_that_drives_is_refused(make):
    body = resonator(make, 10.0, damper_rows=sp.csr_matrix([[1.0]]), damper_ns_m=np.array([-1.0]))

    with pytest.raises(ModesError, match="dashpot"):
        solve_modes(body)


def test_cords_have_no_material_loss(make):
    # Half the stiffness of the one mass is the cord's: half the loss is left.
    body = resonator(make, 100.0, loss=((1.0, 0.02),), cords=sp.csr_matrix([[0.5 * (TWO_PI * 100.0) ** 2]]))

    np.testing.assert_allclose(
        solve_modes(body).decay.material, 0.5 * 0.5 * 0.02 * TWO_PI * 100.0, rtol=1e-12
    )


def test_beyond_critical_a_mode_is_taken_as_critically_damped_and_told(make):
    # Critical: c = 2 sqrt(k m), a = omega (Den Hartog, Mechanical Vibrations, 1956, ch. 2).
    body = resonator(make, 10.0, damper_rows=sp.csr_matrix([[1.0]]), damper_ns_m=np.array([1e4]))

    modes = solve_modes(body)

    assert modes.decay.support[0] == pytest.approx(0.999 * TWO_PI * 10.0)
    assert modes.decay.total[0] < modes.omega[0]
    assert any("a mode is damped beyond critical (10 Hz)" in note for note in modes.warnings)


@pytest.mark.parametrize(("share", "said"), [(0.15, False), (0.3, True)])
def test_a_damper_so_strong_that_modes_would_couple_is_told(make, share, said):
    body = resonator(
        make, 100.0, damper_rows=sp.csr_matrix([[1.0]]), damper_ns_m=np.array([2.0 * share * TWO_PI * 100.0])
    )

    modes = solve_modes(body)

    assert modes.decay.support[0] == pytest.approx(share * modes.omega[0])
    assert any("would couple modes" in note for note in modes.warnings) is said
