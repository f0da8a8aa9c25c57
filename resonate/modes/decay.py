"""How fast each mode dies, and what of: material, heat flow, supports; radiation is the air's."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.errors import ModesError
from resonate.modes.modeset import Decay

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray
    from scipy.sparse import csr_matrix

    from resonate.body.body import Forms, HeatForm

    Array = NDArray[np.float64]


def loss_factor(points: Sequence[tuple[float, float]], frequency_hz: Array) -> Array:
    """Material loss factor (m,) at some frequencies (m,), Hz.

    Linear in the logarithm of frequency between the given (hertz, eta) points, constant outside.

    Raises
    ------
    ModesError
        If there is no point, frequencies do not ascend from above zero, or a factor is negative.
    """
    hertz = np.array([point[0] for point in points], dtype=float)
    eta = np.array([point[1] for point in points], dtype=float)
    if len(points) == 1:
        hertz = np.ones(1)
    good = len(points) > 0 and np.all(hertz > 0.0) and np.all(np.diff(hertz) > 0.0)
    if not good or not np.all(np.isfinite(eta)) or np.any(eta < 0.0):
        raise ModesError(
            what=f"loss factor points {tuple(points)!r}",
            where="material",
            fix="give [hertz, eta] pairs with ascending hertz above 0 and eta at or above 0",
        )
    found: Array = np.interp(np.log(frequency_hz), np.log(hertz), eta)
    return found


def energy_share(part: csr_matrix | None, shape: Array, omega: Array) -> Array:
    """Share (m,) of each mode's strain energy that sits in ``part`` (f, f) of the stiffness."""
    if part is None or shape.shape[1] == 0:
        return np.zeros(len(omega))
    share: Array = np.clip(np.einsum("ij,ij->j", shape, part @ shape) / omega**2, 0.0, 1.0)
    return share


def thermoelastic_loss(heat: Sequence[HeatForm], shape: Array, omega: Array) -> Array:
    """Loss factor (m,) by heat flow from the compressed to the stretched side.

    ``eta = sum_j (C phi)_j^2 x_j / (1 + x_j^2) / omega^2`` with ``x_j = omega tau_j``.

    References
    ----------
    Zener, Internal friction in solids I and II, Phys. Rev. 52 (1937) 230 and 53 (1938) 90.
    """
    eta = np.zeros(len(omega))
    for form in heat:
        weight = np.asarray(form.operator @ shape) ** 2
        turn = np.asarray(form.relaxation_s)[:, None] * omega[None, :]
        eta += np.sum(weight * turn / (1.0 + turn**2), axis=0) / omega**2
    return eta


# Decay as a share of omega at which a mode still swings; and from which a damper's pull on other modes matters.
MOST = 0.999
STRONG = 0.2
# Below this a mode is motion rather than sound, Hz.
_SLOW_HZ = 20.0


def within_critical(decay: Decay, omega: Array) -> tuple[Decay, tuple[str, ...]]:
    """Hold every mode just below critical damping, and say which were not or came near.

    A body on foam creeps back where a critically damped one returns: neither can be heard.
    """
    notes: list[str] = []
    hertz, total = omega / (2.0 * np.pi), decay.total
    over = np.flatnonzero(total > MOST * omega)
    if len(over):
        band = dict.fromkeys((f"{hertz[over[0]]:.4g}", f"{hertz[over[-1]]:.4g}"))
        what = "a mode is" if len(over) == 1 else f"{len(over)} modes are"
        notes.append(f"{what} damped beyond critical ({' to '.join(band)} Hz): taken as critically damped")
        share = np.where(total > MOST * omega, MOST * omega / np.where(total > 0.0, total, 1.0), 1.0)
        parts = (decay.material, decay.thermoelastic, decay.support, decay.radiation)
        decay = Decay(*(part * share for part in parts))
    strong = np.flatnonzero((decay.support > STRONG * omega) & (hertz > _SLOW_HZ) & (total <= MOST * omega))
    if len(strong):
        notes.append(
            f"its dampers are so strong ({decay.support[strong[0]] / omega[strong[0]]:.2g} of critical at "
            f"{hertz[strong[0]]:.4g} Hz) that they would couple modes, which is left out: weaken them, or fix it there"
        )
    return decay, tuple(notes)


def decays(forms: Forms, loss: Sequence[tuple[float, float]], shape: Array, omega: Array) -> Decay:
    """Decay rates by cause, to first order in the losses.

    The material loses in proportion to the strain energy that sits in it: what cords and springs
    store is theirs, and is lost in their dashpots, if they have any. A mode may come out overdamped.

    Parameters
    ----------
    forms : Forms
        The energies and the dashpots over the f freedoms that the supports leave.
    loss : sequence of (float, float)
        Material loss factor as (hertz, eta) points.
    shape : Array
        (f, m) mass-normalised, kg**-0.5.
    omega : Array
        (m,) rad/s.

    Returns
    -------
    Decay
        ``a_i`` (m,), 1/s: material ``eta omega / 2``, thermoelastic ``eta omega / 2``, support
        ``sum_j c_j (row_j phi)^2 / 2``; radiation zero, since it belongs to the air.

    References
    ----------
    Johnson & Kienholz, Finite element prediction of damping in structures with constrained
    viscoelastic layers, AIAA J. 20 (1982): loss by modal strain energy (from memory).
    """
    cords = energy_share(forms.cords, shape, omega)
    springs = energy_share(getattr(forms, "springs", None), shape, omega)
    own = np.clip(1.0 - cords - springs, 0.0, 1.0)
    material = 0.5 * loss_factor(loss, omega / (2.0 * np.pi)) * omega * own if len(omega) else np.zeros(0)
    dampers = np.asarray(forms.damper_ns_m, dtype=float)
    if np.any(dampers < 0.0):
        raise ModesError(
            what=f"a dashpot of {dampers.min():.3g} N s/m",
            where="support",
            fix="give a damper at or above 0",
        )
    support = np.zeros(len(omega))
    if len(dampers):
        support = 0.5 * np.sum(dampers[:, None] * np.asarray(forms.damper_rows @ shape) ** 2, axis=0)
    return Decay(
        material=material,
        thermoelastic=0.5 * thermoelastic_loss(forms.heat, shape, omega) * omega,
        support=support,
        radiation=np.zeros(len(omega)),
    )
