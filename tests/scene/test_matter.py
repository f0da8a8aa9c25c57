"""Elastic constants: what is accepted is stable, what is unstable is refused."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from pydantic import ValidationError

from resonate.scene.matter import MaterialSpec, StrikerSpec


def compliance(young, shear, poisson):
    """Compliance matrix in Voigt order (Jones, Mechanics of Composite Materials, 1999, eq. 2.25)."""
    (e1, e2, e3), (g12, g13, g23), (n12, n13, n23) = young, shear, poisson
    matrix = np.diag([1 / e1, 1 / e2, 1 / e3, 1 / g23, 1 / g13, 1 / g12])
    matrix[0, 1] = matrix[1, 0] = -n12 / e1
    matrix[0, 2] = matrix[2, 0] = -n13 / e1
    matrix[1, 2] = matrix[2, 1] = -n23 / e2
    return matrix


moduli = st.floats(0.05, 20.0)
ratios = st.floats(-0.95, 1.9)


@given(young=st.tuples(moduli, moduli, moduli), poisson=st.tuples(ratios, ratios, ratios))
def test_a_material_is_accepted_exactly_when_its_strain_energy_is_positive(young, poisson):
    matrix = compliance(young, (1.0, 1.0, 1.0), poisson)
    scale = np.sqrt(np.diag(matrix))
    least = np.linalg.eigvalsh(matrix / np.outer(scale, scale))[0]
    if abs(least) < 1e-9:
        return  # at the boundary rounding decides
    table = {"density": 1000, "young": list(young), "shear": [1.0, 1.0, 1.0], "poisson": list(poisson)}
    if least > 0:
        assert not MaterialSpec.model_validate(table).isotropic
    else:
        with pytest.raises(ValidationError, match="unstable"):
            MaterialSpec.model_validate(table)


def test_isotropic_relations():
    # E = 200 GPa, nu = 0.3: G = 76.923 GPa (elementary).
    steel = MaterialSpec.model_validate({"density": 7850, "young": "200 GPa", "poisson": 0.3})
    assert steel.isotropic
    assert steel.shear_pa == pytest.approx([76.92307692e9] * 3)
    same = MaterialSpec.model_validate({"density": 7850, "young": "200 GPa", "shear": "80 GPa"})
    assert same.poisson[0] == pytest.approx(0.25)
    assert same.isotropic


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"poisson": 0.5}, "out of range"),
        ({"poisson": -1}, "out of range"),
        ({"density": 0}, "out of range"),
        ({"young": "-3 GPa"}, "out of range"),
        ({"young": "3 kg"}, "not a pressure unit"),
        ({"shear": "200 GPa", "poisson": 0.3}, "does not fit"),
        ({"loss": 2}, "out of range"),
        ({"loss": []}, "not a loss factor"),
        ({"loss": [[0, 0.1]]}, "out of range"),
        ({"loss": [[100, 0.1, 3]]}, "not a pair"),
        ({"poisson": [0.3, 0.3, 0.3]}, "young = .* has one value"),
        ({"young": [1e9, 1e9]}, "shear is missing"),
        ({"young": [1e9, 1e9], "shear": [1e9] * 3, "poisson": [0.1] * 3}, "not a list of 3"),
        ({"colour": "red"}, "Extra inputs"),
    ],
)
def test_refusals(change, words):
    table = {"density": 7850, "young": "200 GPa", "poisson": 0.3, **change}
    if "young" in change and isinstance(change["young"], list) and "poisson" not in change:
        del table["poisson"]
    with pytest.raises(ValidationError, match=words):
        MaterialSpec.model_validate(table)


def test_loss_by_frequency():
    table = {"density": 400, "young": 1e9, "loss": [[100, 0.005], ["5 kHz", 0.02]]}
    assert MaterialSpec.model_validate(table).loss == ((100.0, 0.005), (5000.0, 0.02))


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"mass": 0}, "out of range"),
        ({"tip_radius": "0 mm"}, "out of range"),
        ({"restitution": 0}, "out of range"),
        ({"restitution": 1.01}, "out of range"),
        ({"reference_speed": 0}, "out of range"),
        ({"tip_poisson": 0.5}, "out of range"),
    ],
)
def test_strikers_are_real(change, words):
    table = {"mass": "12 g", "tip_radius": "8 mm", "tip_young": "2 MPa", "restitution": 0.6}
    assert StrikerSpec.model_validate(table).reference_speed_m_s == 1.0
    with pytest.raises(ValidationError, match=words):
        StrikerSpec.model_validate({**table, **change})
