"""Fast sines and cosines."""

from __future__ import annotations

import numpy as np

from resonate.field.samples import phasor


def test_phasor_is_cosine_and_sine_at_any_size():
    angle = np.concatenate((np.linspace(-10.0, 10.0, 4001), [0.0, np.pi, 1e4, -123456.7]))
    got = phasor(angle)
    # Single precision after whole turns are gone: 2e-7 for the angle and 6e-8 for the result.
    np.testing.assert_allclose(got.cosine, np.cos(angle), atol=3e-7)
    np.testing.assert_allclose(got.sine, np.sin(angle), atol=3e-7)
    assert got.cosine.dtype == np.float64


def test_phasor_leaves_its_argument_alone():
    angle = np.full(3, 7.0)
    phasor(angle)
    np.testing.assert_array_equal(angle, 7.0)
