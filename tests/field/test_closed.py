"""Solids as simple sources on their surface, against the exact field of a small ball."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import eval_legendre, spherical_jn, spherical_yn

from resonate.body.solid_grid import ball_grid
from resonate.body.solid_skin import hex_skin
from resonate.field.closed import ClosedSurface
from resonate.field.samples import Samples
from resonate.scene.model import BallShape

RADIUS_M = 0.05


def hankel(degree, x, *, derivative=False):
    return spherical_jn(degree, x, derivative) - 1j * spherical_yn(degree, x, derivative)


@pytest.mark.parametrize(("degree", "share"), [(0, 1.0), (1, 2.0 / 3.0), (2, 3.0 / 5.0)])
def test_a_small_ball_makes_the_share_that_is_documented(air_model, degree, share):
    skin = hex_skin(ball_grid(BallShape(diameter_m=2 * RADIUS_M), 0.03, 5), lambda points: ["surface"] * len(points))
    wavenumber = 0.1 / RADIUS_M
    shape = eval_legendre(degree, skin.normals[:, 1])
    samples = Samples("ball", skin.points_m, np.array([wavenumber]), 1, 0, 1e-3, air_model.air)
    distance = 1.0
    (found,) = ClosedSurface(samples, shape[None], skin.area_m2).weights(np.array([0.0, distance, 0.0]), distance)
    # p = j rho c v P_n h_n(k r)/h_n'(k a), exp(+j omega t) (Morse & Ingard, Theoretical Acoustics, section 7.2); the
    # weight is that of the acceleration, without the delay.
    k = wavenumber
    exact = air_model.air.density_kg_m3 / k * hankel(degree, k * distance) / hankel(degree, k * RADIUS_M, derivative=True)
    exact = -exact * np.exp(1j * k * distance)
    # The share holds for k a -> 0; here k a = 0.1.
    np.testing.assert_allclose(abs(found) / abs(exact), share, rtol=0.02)
    if degree == 0:
        np.testing.assert_allclose(found, exact, rtol=0.15)
