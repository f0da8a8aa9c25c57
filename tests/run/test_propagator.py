"""The exact step of one mode, against the matrix exponential and against its own energy."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import quad_vec
from scipy.linalg import expm

from resonate.run.propagator import coefficients

STEP_S = 1.0 / 192000.0


def random_modes(count, *, seed, low_hz=3.0, high_hz=100e3, least=1e-5, most=0.3):
    """Modes spread evenly in the logarithm of frequency and of damping ratio."""
    rng = np.random.default_rng(seed)
    omega = 2.0 * np.pi * low_hz * (high_hz / low_hz) ** rng.random(count)
    return omega, omega * least * (most / least) ** rng.random(count)


def exact_step(omega, decay, step_s):
    """[q, v, f] over a step, by scaling and squaring (Higham 2005, in scipy), time counted in units of h."""
    stiff, damp = (omega * step_s) ** 2, 2.0 * decay * step_s
    return expm(np.array([[0.0, 1.0, 0.0], [-stiff, -damp, 1.0], [0.0, 0.0, 0.0]]))


def stepped(found, index, step_s):
    """The same matrix from the coefficients."""
    w2, c, d, g = (float(part[index]) for part in (found.w2, found.c, found.d, found.g))
    h = step_s
    return np.array([[1.0 - w2 * c, d / h, c / h**2], [-w2 * d * h, 1.0 - g, d / h], [0.0, 0.0, 1.0]])


@pytest.mark.parametrize("step_s", [1.0 / 48000.0, STEP_S, 1.0 / (48000.0 * 512)])
def test_step_is_the_matrix_exponential(step_s):
    omega, decay = random_modes(200, seed=1)
    found = coefficients(omega, decay, step_s, rounded=False)
    for index in range(len(omega)):
        exact = exact_step(omega[index], decay[index], step_s)
        # Rounding of the exponential itself is 1e-13 of its largest entry.
        error = np.abs(stepped(found, index, step_s) - exact).max() / np.abs(exact).max()
        assert error < 1e-12


@pytest.mark.parametrize("ratio", [0.999999, 1.0, 1.000001, 1.5, 30.0, 1000.0])
@pytest.mark.parametrize("hertz", [0.1, 40.0, 5e3, 90e3])
def test_step_of_overdamped_and_critical_modes(hertz, ratio):
    omega = np.array([2.0 * np.pi * hertz])
    found = coefficients(omega, ratio * omega, STEP_S, rounded=False)
    exact = exact_step(float(omega[0]), ratio * float(omega[0]), STEP_S)
    # The exponential of a stiff matrix loses digits in proportion to its norm.
    norm = max(1.0, 2.0 * ratio * float(omega[0]) * STEP_S)
    np.testing.assert_allclose(stepped(found, 0, STEP_S), exact, rtol=0.0, atol=1e-12 * norm)


def test_step_without_stiffness_is_that_of_a_free_mass():
    found = coefficients(np.zeros(1), np.zeros(1), STEP_S)
    # 44 bits are kept.
    np.testing.assert_allclose([found.c[0], found.d[0]], [0.5 * STEP_S**2, STEP_S], rtol=2.0**-44)
    assert found.w2[0] == 0.0
    assert found.g[0] == 0.0


def test_force_response_of_slow_modes_keeps_all_digits():
    # c is the step response: h^2/2 (1 - 2 a h/3 - w^2 h^2/12 + ...), which 1 - e11 alone loses for small w h.
    omega, decay = np.array([1e-3, 1.0, 50.0, 300.0]), np.array([1e-4, 0.9, 5.0, 100.0])
    found = coefficients(omega, decay, STEP_S, rounded=False)
    x, y = decay * STEP_S, (omega * STEP_S) ** 2
    # Next term of the series of x'' + 2 a x' + w^2 x = 1: of the order (a h)^3 = 1e-10 of the last digit kept.
    series = 0.5 * STEP_S**2 * (1.0 - 2.0 * x / 3.0 + x**2 / 3.0 - y / 12.0)
    np.testing.assert_allclose(found.c, series, rtol=1e-10)


def test_coefficients_keep_44_bits():
    omega, decay = random_modes(50, seed=2)
    found = coefficients(omega, decay, STEP_S)
    for part in (found.c, found.d, found.g):
        mantissa = np.frexp(part)[0] * 2.0**44
        np.testing.assert_array_equal(mantissa, np.round(mantissa))


def test_slow_modes_keep_their_frequency_however_many_steps():
    # 20 Hz at 24.6 MHz: 2 million steps are 1.6 periods; rounding of 1 - e11 must not become a drift of phase.
    omega, decay, h = 2.0 * np.pi * 20.0, 0.3, 1.0 / (48000.0 * 512)
    found = coefficients(np.array([omega]), np.array([decay]), h)
    one = np.eye(2) + np.array([[-(omega**2) * found.c[0], found.d[0]], [-(omega**2) * found.d[0], -found.g[0]]])
    state, count = np.array([1.0, 0.0]), 2**21
    many = np.linalg.matrix_power(one, count) @ state
    swing = np.sqrt(omega**2 - decay**2)
    time = count * h
    exact = np.exp(-decay * time) * (np.cos(swing * time) + decay / swing * np.sin(swing * time))
    assert many[0] == pytest.approx(exact, abs=1e-9)


def test_work_of_a_constant_force_is_energy_and_loss():
    # f (q1 - q0) = E1 - E0 + integral of 2 a v^2, the integral by quadrature of the analytic motion.
    omega, decay = random_modes(40, seed=3, low_hz=200.0)
    rng = np.random.default_rng(4)
    q0, v0, f = rng.normal(size=(3, len(omega)))
    q0, f = q0 / omega, f * omega
    found = coefficients(omega, decay, STEP_S, rounded=False)
    rest = f - found.w2 * q0
    q1, v1 = q0 + found.c * rest + found.d * v0, v0 + found.d * rest - found.g * v0
    lam = -decay + 1j * np.sqrt(omega**2 - decay**2)
    z = v0 - np.conj(lam) * q0

    def heat(time):
        now = np.exp(lam * time) * z + np.expm1(lam * time) / lam * f
        return 2.0 * decay * (now.real - decay * now.imag / lam.imag) ** 2

    lost = quad_vec(heat, 0.0, STEP_S, epsrel=1e-13)[0]
    gained = 0.5 * (v1**2 - v0**2 + omega**2 * (q1**2 - q0**2))
    scale = 0.5 * (v0**2 + omega**2 * q0**2) + np.abs(f * (q1 - q0))
    assert np.max(np.abs(f * (q1 - q0) - gained - lost) / scale) < 1e-12
    assert np.all(lost > 0.0)
