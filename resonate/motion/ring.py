"""A ring slowed down so that it can be seen, and the size of what cannot."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.motion.shutter import damped

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.run.record import Segment
    from resonate.run.track import BodyTrack

    Array = NDArray[np.float64]
    ComplexArray = NDArray[np.complex128]
    Indices = NDArray[np.int64]

# Below a femtometre, the size of an atomic nucleus, a displacement is written as zero.
_NOTHING_M = 1e-15


def readable_ring(
    track: BodyTrack, times_s: Array, z: ComplexArray, *, chosen: Indices, shown_hz: Array
) -> Array:
    """Modal displacement with its true envelope and onset, at a frequency the eye can follow.

    Between hits ``q_shown = |z(t)| / wd sin(2 pi f_shown (t - t_hit) + arg z(t_hit))`` with ``t_hit``
    the end of the last contact: at that moment shown and true displacement are equal, sign and all.
    During a contact the displacement is the true one.

    Parameters
    ----------
    track : BodyTrack
        What the run left of the body.
    times_s : Array
        (t,) scene seconds.
    z : ComplexArray
        (k, t) states of the chosen modes at those times.
    chosen : Indices
        (k,) which modes they are, zero-based.
    shown_hz : Array
        (k,) the frequency at which each is shown, Hz.

    Returns
    -------
    Array
        (k, t) displacements, not yet enlarged, m kg**0.5.
    """
    speed = damped(track.modes.omega, track.modes.decay.total)[chosen]
    begins, ends = contact_spans(track)
    hits = np.concatenate([[track.segments[0].begin_s], ends])
    last = np.searchsorted(ends, times_s, side="right")
    # Only the hits that these times look back to.
    used, position = np.unique(last, return_inverse=True)
    phase = np.angle(track.modal(hits[used])[chosen])[:, position]
    phase += 2.0 * np.pi * shown_hz[:, None] * (times_s - hits[last])
    shown = np.abs(z) * np.sin(phase)
    touching = np.searchsorted(begins, times_s, side="right") > last
    shown[:, touching] = z.imag[:, touching]
    return np.asarray(shown / speed[:, None])


def contact_spans(track: BodyTrack) -> tuple[Array, Array]:
    """Begin and end (c,) of every contact segment in which a force acted, scene seconds.

    The end is that of the last step with a force; a segment may go on a little to be sure.
    """
    spans = [_loaded(part) for part in track.segments if part.is_contact]
    loaded = np.array([span for span in spans if span is not None]).reshape(-1, 2)
    return loaded[:, 0], loaded[:, 1]


def _loaded(part: Segment) -> tuple[float, float] | None:
    if part.force_n is None:
        return None
    steps = np.flatnonzero(np.any(part.force_n != 0.0, axis=0))
    if not len(steps):
        return None
    return part.begin_s + part.step_s * float(steps[0]), part.begin_s + part.step_s * float(steps[-1] + 1)


def unresolved_m(squares: Array, z: ComplexArray, speed: Array) -> Array:
    """Root-mean-square displacement of vibration that frames cannot follow.

    ``U^2 = 1/2 sum |phi|^2 |z|^2 / wd^2`` at the surface point where it is largest.

    Parameters
    ----------
    squares : Array
        (n, m) squared length of each shape's displacement at each surface point, 1/kg.
    z : ComplexArray
        (m, t) states of those modes.
    speed : Array
        (m,) their damped angular frequencies wd, rad/s.

    Returns
    -------
    Array
        (t,) U, m; zero below a femtometre.
    """
    power = 0.5 * (np.abs(z) / speed[:, None]) ** 2
    largest = np.max(squares, axis=0, initial=0.0)
    result = np.zeros(z.shape[1])
    active = np.flatnonzero(largest @ power > _NOTHING_M**2)
    if not len(active):
        return result
    power = power[:, active]
    # A mode that adds less than rounding at its own best point is left out of the product.
    share = largest * np.max(power, axis=1)
    kept = np.flatnonzero(share > 1e-15 * np.max(share) / len(share))
    result[active] = np.sqrt(np.max(squares[:, kept] @ power[kept], axis=0))
    return result
