"""The band limit: pass, stop, gain on a ringing mode, delivery at any time."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import quad

from resonate.errors import ResonateError
from resonate.sound.filter import BandLimit, Grid, band_limit, cell_rule, deliver

# Delivery rate, what is heard, pass and stop edge: 20 kHz is kept everywhere, and what lies between the
# edges folds back above the pass edge only.
EDGES = [
    (44100, 20e3, 20e3, 24.1e3),
    (48000, 20e3, 20e3, 28e3),
    (48000, 40e3, 20e3, 28e3),
    (96000, 20e3, 20e3, 28e3),
    (96000, 40e3, 40e3, 56e3),
    (192000, 60e3, 60e3, 84e3),
]


@pytest.mark.parametrize(("rate", "heard", "pass_hz", "stop_hz"), EDGES)
def test_edges(rate, heard, pass_hz, stop_hz):
    limit = band_limit(rate, heard_hz=heard)
    np.testing.assert_allclose([limit.pass_hz, limit.stop_hz], [pass_hz, stop_hz], rtol=1e-12)
    assert rate - limit.stop_hz >= limit.pass_hz - 1e-6


@pytest.mark.parametrize(("rate", "heard"), [(44100, 20e3), (48000, 20e3), (96000, 40e3)])
def test_flat_below_and_silent_above(rate, heard):
    limit = band_limit(rate, heard_hz=heard)
    passed = limit.gain(2j * np.pi * np.linspace(0.0, limit.pass_hz, 301))
    stopped = limit.gain(2j * np.pi * np.linspace(limit.stop_hz, 6.0 * limit.stop_hz, 301))
    # Kaiser's ripple for the attenuation designed (220 dB is 1e-11); 110 dB would do.
    np.testing.assert_allclose(passed, 1.0, atol=1e-10)
    assert 20.0 * np.log10(np.max(np.abs(stopped))) < -190.0


def test_gain_is_the_convolution_with_a_decaying_mode():
    limit = band_limit(48000, heard_hz=20e3)
    for rate in (-40.0 + 2j * np.pi * 3e3, -900.0 + 2j * np.pi * 21e3, -300.0 + 2j * np.pi * 24e3):
        real, imaginary = (
            quad(
                lambda u, part=part, rate=rate: float(
                    limit.kernel(np.array(u)) * getattr(np.exp(-rate * u), part)
                ),
                -limit.half_s,
                limit.half_s,
                limit=2000,
                epsabs=1e-12,
            )[0]
            for part in ("real", "imag")
        )
        # Adaptive quadrature of scipy, 1e-10.
        np.testing.assert_allclose(limit.gain(np.array([rate]))[0], real + 1j * imaginary, atol=1e-10)


def test_kernel_is_even_and_its_slope_is_its_derivative():
    limit = band_limit(48000, heard_hz=20e3)
    offset = np.linspace(0.0, 0.999 * limit.half_s, 500)
    np.testing.assert_array_equal(limit.kernel(offset), limit.kernel(-offset))
    step = 1e-9
    slope = (limit.kernel(offset + step) - limit.kernel(offset - step)) / (2.0 * step)
    # Central difference: rounding 48000 * 1e-16 / 1e-9 and (2 pi 24 kHz step)^2 / 6.
    np.testing.assert_allclose(limit.slope(offset), slope, atol=1e-8 * np.max(np.abs(slope)))


@pytest.mark.parametrize("rate", [44100.0, 48000.0, 192000.0])
def test_delivery_is_the_plain_sum_of_kernels(rate):
    limit = band_limit(rate, heard_hz=20e3)
    generator = np.random.default_rng(5)
    nodes = np.sort(generator.uniform(-0.003, 0.006, 400))
    values = generator.normal(size=(400, 2))
    got = deliver(limit, values, nodes_s=nodes, grid=Grid(3e-4, rate, 170))
    times = 3e-4 + np.arange(170) / rate
    plain = limit.kernel(times[:, None] - nodes) @ values
    # The table interpolates to 1e-12 of the kernel's peak.
    np.testing.assert_allclose(got, plain, atol=1e-11 * np.max(np.abs(plain)))


def test_delivery_ignores_what_is_out_of_reach():
    limit = band_limit(48000, heard_hz=20e3)
    values = np.ones((2, 1))
    got = deliver(limit, values, nodes_s=np.array([-0.5, 0.9]), grid=Grid(0.0, 48000.0, 100))
    np.testing.assert_array_equal(got, np.zeros((100, 1)))


@pytest.mark.parametrize("width", [1e-4, 1 / 192000, 1 / 3072000])
def test_cell_rule_integrates_every_frequency_below_its_top(width):
    nodes, weights = cell_rule(width, 48e3)
    frequency = np.linspace(1.0, 48e3, 40)
    exponent = 2j * np.pi * frequency
    exact = np.expm1(exponent * width) / exponent
    got = np.exp(exponent[:, None] * nodes) @ weights
    np.testing.assert_allclose(got, exact, atol=1e-12 * width)


def test_edges_out_of_order_are_refused():
    with pytest.raises(ResonateError, match="below the stop edge"):
        BandLimit(20e3, 19e3)
