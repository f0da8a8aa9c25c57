"""What modes that are not kept do to a contact: a ladder of broad stand-ins above the highest solved one.

A short blow on a large thin body meets modes far beyond any budget: their static compliance alone would act as a
spring that gives back what real waves carry away. The sum of (row phi)^2 over the modes in a band is smooth and follows
a power of frequency: constant for bending plates and strings (the driving-point impedance of an infinite plate,
8 sqrt(D rho h), is a constant), -1/2 for bending bars. On plates it goes on as the kept modes show it, since half of
what is missing lies beyond the mesh; elsewhere the power is what takes the highest kept modes to the static compliance
of the missing ones. Each missing band, half as wide as its lower end, swings as one damped mode: its decay is what
dephasing within the band makes of it. Energy in them is never heard and counts as lost to truncation.

References
----------
Cremer, Heckl & Petersson, Structure-Borne Sound (2005), ch. 5: impedances of infinite bars and plates as mean
values over modes (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

#: Stand-ins of one contact; together they reach 60 times beyond the highest solved mode.
RUNGS = 12
_RATIO = 1.5
# Modes below this share of the highest one do not tell how the bands beyond it will be.
_FROM = 0.3
# Powers that occur.
_LEAST, _MOST = -0.5, 0.9
# Decay as a share of a band's width; of the last stand-in, as a share of its frequency.
_DEPHASING, _LAST = 0.5, 0.7


@dataclass(frozen=True, slots=True)
class Ladder:
    """Stand-ins (r,) of unit modal mass.

    Undamped angular frequency and decay rate, 1/s, and gain along the force, kg**-0.5.
    """

    omega: Array
    decay: Array
    gain: Array


#: Where nothing is missing.
NONE = Ladder(np.zeros(RUNGS), np.zeros(RUNGS), np.zeros(RUNGS))


def ladder(
    omega: Array, gains: Array, *, give_m_n: float, power: float | None = None, least_s_kg: float = 0.0
) -> Ladder:
    """Lay the stand-ins of one spot.

    Parameters
    ----------
    omega : Array
        (m,) rad/s, ascending, of the modes that are kept.
    gains : Array
        (m,) what they move along the force at the spot, kg**-0.5.
    give_m_n : float
        Static compliance of all other modes there, m/N.
    power : float, optional
        Of frequency, in (-1, 1), that squared gains per band follow; the static compliance is not needed then.
    least_s_kg : float
        The mean mobility beyond the kept modes is no less than this.
    """
    # A mean mobility Y comes from squared gains of 2 Y / pi for each rad/s.
    density = max(_density(omega, gains), 2.0 * least_s_kg / np.pi if len(omega) else 0.0)
    if density == 0.0 and give_m_n == 0.0:
        # A spot that no mode moves, or a body without any: the whole answer is in the contact itself.
        return NONE
    top = float(omega[-1])
    # All of it lies above `top`: give = density / ((1 - power) top).
    if power is not None:
        give_m_n = density / ((1.0 - power) * top)
    elif give_m_n > 0.0:
        power = float(np.clip(1.0 - density / (top * give_m_n), _LEAST, _MOST))
    else:
        power = 0.0
    edges = top * _RATIO ** np.arange(RUNGS)
    lightness = np.diff(edges ** (1.0 + power)) / (1.0 + power)
    softness = -np.diff(edges ** (power - 1.0)) / (1.0 - power)
    rest = edges[-1] ** (power - 1.0) / (1.0 - power)
    share = np.concatenate((softness, [rest]))
    at = np.concatenate((np.sqrt(lightness / softness), [2.0 * edges[-1]]))
    decay = np.concatenate((_DEPHASING * np.diff(edges), [_LAST * at[-1]]))
    return Ladder(at, decay, at * np.sqrt(give_m_n * share / np.sum(share)))


def _density(omega: Array, gains: Array) -> float:
    """Squared gains per rad/s: slope of their running sum, by least squares, modes that do not move left out."""
    square = gains**2
    high = omega >= _FROM * np.max(omega, initial=0.0)
    at, weight = omega[high], square[high]
    whole = float(np.sum(weight))
    if whole == 0.0:
        return 0.0
    along = at - float(at @ weight) / whole
    spread = float(weight @ along**2)
    if spread <= (1e-3 * omega[-1]) ** 2 * whole:
        # One frequency alone tells no slope: it stands for the band below it.
        return whole / float(omega[-1])
    running = np.cumsum(weight) - 0.5 * weight
    return float((weight * along) @ running) / spread
