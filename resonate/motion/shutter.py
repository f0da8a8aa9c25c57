"""The exact mean of modal motion over an open shutter.

A camera does not see a vibration, it sees its mean over the time the shutter is open. That mean
follows from states at the two ends of the shutter alone, so it costs nothing to have it exactly.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from resonate.run.record import Segment
    from resonate.run.track import BodyTrack

    Array = NDArray[np.float64]
    ComplexArray = NDArray[np.complex128]

# Below this phase, w Ts, the state identity divides rounding by so small a number that fewer than
# ten digits are left; the mean is then a quadrature.
_SMALL_PHASE = 1e-3
# Longest list of panels into which one contact is cut by that quadrature.
_MOST_PANELS = 512
# Below this |lambda T|, 1 + x/2 is (e^x - 1)/x to rounding.
_STILL = 1e-9


def displacement(z: ComplexArray, omega: Array, rate_1_s: Array) -> Array:
    """Modal displacement of a complex modal state.

    Parameters
    ----------
    z : ComplexArray
        (m, t) states, ``z = q' - conj(lambda) q`` with ``lambda = -a + j wd``.
    omega, rate_1_s : Array
        (m,) undamped angular frequency, rad/s, and decay rate a, 1/s, below it.

    Returns
    -------
    Array
        (m, t) ``q = Im z / wd``, m kg**0.5.
    """
    return np.asarray(z.imag / damped(omega, rate_1_s)[:, None])


def damped(omega: Array, rate_1_s: Array) -> Array:
    """Damped angular frequency (m,), ``wd = sqrt(w^2 - a^2)``, rad/s."""
    return np.asarray(np.sqrt((omega - rate_1_s) * (omega + rate_1_s)))


def free_mean(z: ComplexArray, omega: Array, rate_1_s: Array, open_s: Array) -> Array:
    """Mean displacement over a stretch without forces.

    Parameters
    ----------
    z : ComplexArray
        (m, t) states at the beginning of each stretch.
    omega, rate_1_s : Array
        (m,) angular frequency, rad/s, and decay rate, 1/s.
    open_s : Array
        (t,) lengths of the stretches, s; zero gives the instantaneous value.

    Returns
    -------
    Array
        (m, t) ``Im[z (exp(lambda T) - 1) / (lambda T)] / wd``. Started from the beginning rather than
        the middle, nothing in it can overflow however strong the damping.
    """
    rate = -rate_1_s + 1j * damped(omega, rate_1_s)
    turned = rate[:, None] * open_s[None, :]
    still = np.abs(turned) < _STILL
    divisor = np.where(still, 1.0, turned)
    factor = np.where(still, 1.0 + 0.5 * turned, np.expm1(turned) / divisor)
    return displacement(z * factor, omega, rate_1_s)


def forced_mean(
    change: ComplexArray, impulse: Array, *, omega: Array, rate_1_s: Array, open_s: float
) -> Array:
    """Mean displacement over a stretch with any force, from its ends.

    Integrating ``q'' + 2 a q' + w^2 q = f`` over the stretch gives
    ``[int f dt - (v1 - v0) - 2 a (q1 - q0)] / (w^2 T)``.

    Parameters
    ----------
    change : ComplexArray
        (m, t) state at the end less state at the beginning.
    impulse : Array
        (m, t) integral of the modal force between them, N s kg**-0.5.
    omega, rate_1_s : Array
        (m,) angular frequency, rad/s, and decay rate, 1/s.
    open_s : float
        The length T by which the integral is divided, s.

    Returns
    -------
    Array
        (m, t) mean displacement, m kg**0.5.
    """
    moved = displacement(change, omega, rate_1_s)
    # v = Re[(1 + j a / wd) z] = Re z - a q
    sped = change.real - rate_1_s[:, None] * moved
    area = (impulse - sped - 2.0 * rate_1_s[:, None] * moved) / omega[:, None] ** 2
    return np.asarray(area / open_s)


def shutter_mean(track: BodyTrack, times_s: Array, *, shutter_s: float) -> Array:
    """Modal displacement as a camera sees it, averaged over a shutter centred at each time.

    Exact in free flight and through contacts. Before the first state of the run the body is at
    rest, and that rest counts in the mean.

    Parameters
    ----------
    track : BodyTrack
        What the run left of the body.
    times_s : Array
        (t,) centres of the shutter, scene seconds.
    shutter_s : float
        How long the shutter is open, s; zero gives the instantaneous displacement.

    Returns
    -------
    Array
        (m, t) mean of q over ``[t - shutter_s/2, t + shutter_s/2]``, m kg**0.5.
    """
    omega, decay = track.modes.omega, track.modes.decay.total
    if shutter_s <= 0.0:
        return displacement(track.modal(times_s), omega, decay)
    start = track.segments[0].begin_s
    opened = np.maximum(times_s - 0.5 * shutter_s, start)
    closed = np.maximum(times_s + 0.5 * shutter_s, start)
    first = track.modal(opened)
    # The length from the two ends as they are, so that rounding of large times does not enter.
    mean = free_mean(first, omega, decay, closed - opened)
    mean *= (closed - opened) / shutter_s
    struck = np.flatnonzero(_meets_contact(track.segments, opened, closed))
    if len(struck):
        begin, end = opened[struck], closed[struck]
        mean[:, struck] = forced_mean(
            track.modal(end) - first[:, struck],
            track.impulse(begin, end),
            omega=omega,
            rate_1_s=decay,
            open_s=shutter_s,
        )
        slow = np.flatnonzero(omega * shutter_s < _SMALL_PHASE)
        if len(slow):
            for column in struck:
                area = _integral(track, opened[column], closed[column])
                mean[slow, column] = area[slow] / shutter_s
    return mean


def _meets_contact(segments: Sequence[Segment], opened: Array, closed: Array) -> NDArray[np.bool_]:
    """Which stretches (t,) overlap a contact."""
    spans = [(part.begin_s, part.end_s) for part in segments if part.is_contact]
    if not spans:
        return np.zeros(len(opened), dtype=bool)
    begins, ends = np.array(spans).T
    # Contacts of one body are in order and do not overlap: compare counts begun and ended.
    begun = np.searchsorted(begins, closed, side="left")
    ended = np.searchsorted(ends, opened, side="right")
    return np.asarray(begun > ended)


def _integral(track: BodyTrack, begin_s: float, end_s: float) -> Array:
    """Integral of q (m,) by Gauss's rule on pieces in which every force is constant."""
    edges = [np.array([begin_s, end_s])]
    for part in track.segments:
        if part.force_n is not None and part.begin_s < end_s and part.end_s > begin_s:
            panels = min(part.force_n.shape[1], _MOST_PANELS)
            edges.append(np.linspace(part.begin_s, part.end_s, panels + 1))
    cuts = np.unique(np.clip(np.concatenate(edges), begin_s, end_s))
    nodes, weights = np.polynomial.legendre.leggauss(4)
    middle, half = 0.5 * (cuts[1:] + cuts[:-1]), 0.5 * np.diff(cuts)
    times = (middle[:, None] + half[:, None] * nodes).ravel()
    q = displacement(track.modal(times), track.modes.omega, track.modes.decay.total)
    return np.asarray(q @ (half[:, None] * weights).ravel())
