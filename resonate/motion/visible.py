"""What of a vibration is shown: which shapes, how much larger, and how much slower."""

from __future__ import annotations

from typing import TYPE_CHECKING, Literal

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from resonate.body.body import Body, Surface
    from resonate.modes.modeset import ModeSet

    Array = NDArray[np.float64]
    Indices = NDArray[np.int64]

Kind = Literal["ring", "swing"]

# Folded frequencies lie between these fractions of the frame rate: 20 to 5 frames a cycle.
SLOWEST_FOLD = 0.05
FASTEST_FOLD = 0.2
# A readable ring reaches this part of the body's size unless the scene says otherwise.
READABLE_SHARE = 0.01
# Neighbouring surface points may move apart or together by this part of their distance.
MOST_STRETCH = 0.5
# Motion smaller than a hundred-thousandth of what is readable is not made visible.
MOST_GAIN = 1e5
# A mode is a swing when this part of its surface motion, or more, is that of a rigid body.
_SWING_SHARE = 0.98
# Shapes weaker than this part of the strongest are rounding, not motion.
_LEAST_SHARE = 1e-6


def reach(shapes: Array) -> Array:
    """Longest displacement vector (m,) of each shape (n, 3, m)."""
    return np.asarray(np.sqrt(np.max(np.sum(shapes**2, axis=1), axis=0)))


def surface_shapes(body: Body, modes: ModeSet) -> Array:
    """Shapes of the modes at the points of the display mesh.

    Parameters
    ----------
    body : Body
        Gives the mesh and the displacement of its points.
    modes : ModeSet
        Its modes. Motions without stiffness are left out: the pose carries them.

    Returns
    -------
    Array
        (n, 3, m) in the body frame, kg**-0.5.
    """
    points = body.surface.points_m
    return np.asarray(body.probe(points) @ modes.shape).reshape(len(points), 3, modes.count)


def body_size_m(surface: Surface) -> float:
    """Longest side of the box round the rest mesh, m."""
    return float(np.max(np.ptp(surface.points_m, axis=0)))


def swings(shapes: Array, points_m: Array, frequency_hz: Array, *, frame_rate_hz: float) -> NDArray[np.bool_]:
    """Which modes are a swing of the whole body, slow enough for frames to follow.

    A body hung from cords has modes that carry it about nearly rigidly. They are motion, not ringing: they
    are shown as they are, neither averaged, nor enlarged, nor slowed down.

    Parameters
    ----------
    shapes : Array
        (n, 3, m) shapes at the mesh points.
    points_m : Array
        (n, 3) the points, m.
    frequency_hz : Array
        (m,) frequencies, Hz.
    frame_rate_hz : float
        Frames per second.

    Returns
    -------
    NDArray[np.bool_]
        (m,) true where the frequency has at least five frames a cycle and a rigid motion fitted to
        the surface leaves less than 2 % of its squared displacement.
    """
    result = np.zeros(len(frequency_hz), dtype=bool)
    slow = np.flatnonzero(frequency_hz <= FASTEST_FOLD * frame_rate_hz)
    if not len(slow):
        return result
    arms = points_m - np.mean(points_m, axis=0)
    arms = arms / max(float(np.max(np.abs(arms))), np.finfo(np.float64).tiny)
    rigid = np.zeros((len(arms), 3, 6))
    for axis in range(3):
        rigid[:, axis, axis] = 1.0
        rigid[:, :, 3 + axis] = np.cross(np.eye(3)[axis], arms)
    basis, singular, _ = np.linalg.svd(rigid.reshape(-1, 6), full_matrices=False)
    basis = basis[:, singular > 1e-9 * singular[0]]
    flat = shapes[:, :, slow].reshape(-1, len(slow))
    whole = np.sum(flat**2, axis=0)
    result[slow] = (whole > 0.0) & (np.sum((basis.T @ flat) ** 2, axis=0) >= _SWING_SHARE * whole)
    return result


def strongest(peak_m: Array, *, most: int) -> Indices:
    """Choose the modes that move the surface most, in ascending order of frequency.

    Parameters
    ----------
    peak_m : Array
        (m,) largest visible surface displacement of each mode over the take, m.
    most : int
        How many to take at most.

    Returns
    -------
    Indices
        (k,) zero-based, ascending; modes below a millionth of the strongest are left out.
    """
    least = _LEAST_SHARE * float(np.max(peak_m, initial=0.0))
    order = np.argsort(-peak_m, kind="stable")[:most]
    return np.sort(order[peak_m[order] > least])


def fold(frequency_hz: Array, *, lowest_hz: float, frame_rate_hz: float) -> Array:
    """Frequencies slow enough to be seen, in unchanged order.

    ``f_shown = 0.2 R f / (f + 3 f_lowest)``: the lowest mode of the body goes to 0.05 of the frame rate R,
    and no frequency reaches 0.2 R. Unlike an exponential approach it still tells two modes a thousand times
    higher apart.

    Parameters
    ----------
    frequency_hz : Array
        (k,) true frequencies, Hz, none below ``lowest_hz``.
    lowest_hz : float
        Lowest mode of the body that rings, Hz. Taken from the body, not from the take, so that a mode is
        slowed alike in every take.
    frame_rate_hz : float
        Frames per second R.

    Returns
    -------
    Array
        (k,) shown frequencies, Hz.
    """
    slack = lowest_hz * (FASTEST_FOLD / SLOWEST_FOLD - 1.0)
    return np.asarray(FASTEST_FOLD * frame_rate_hz * frequency_hz / (frequency_hz + slack))


def peak_displacement_m(shapes: Array, weights: Array, *, most_evaluations: int = 256) -> float:
    """Largest displacement of any mesh point at any time, all shapes together.

    Times are tried in the order of an upper bound, and the search ends when the bound falls below
    what was found, so few of them are evaluated.

    Parameters
    ----------
    shapes : Array
        (n, 3, k) shapes.
    weights : Array
        (t, k) their coordinates.
    most_evaluations : int
        How many times are evaluated at most; then the largest so far is returned.

    Returns
    -------
    float
        The displacement, in the unit of shape times coordinate.
    """
    return _largest(
        np.abs(weights) @ reach(shapes), lambda t: reach(shapes @ weights[t][:, None])[0], most_evaluations
    )


def peak_stretch(shapes: Array, weights: Array, surface: Surface) -> float:
    """Largest relative displacement of two neighbouring mesh points over their distance.

    Below one no edge of the mesh can turn round.

    Parameters
    ----------
    shapes : Array
        (n, 3, k) shapes at the mesh points.
    weights : Array
        (t, k) their coordinates.
    surface : Surface
        The rest mesh.

    Returns
    -------
    float
        The largest ratio over all edges and times.
    """
    sides = surface.triangles[:, [0, 1, 1, 2, 2, 0]].reshape(-1, 2)
    edges = np.unique(np.sort(sides, axis=1), axis=0)
    spans = np.linalg.norm(surface.points_m[edges[:, 1]] - surface.points_m[edges[:, 0]], axis=1)
    apart = spans > 1e-6 * body_size_m(surface)  # doubled points of a sharp corner are one place
    edges, spans = edges[apart], spans[apart]
    strain = (shapes[edges[:, 1]] - shapes[edges[:, 0]]) / spans[:, None, None]
    return peak_displacement_m(strain, weights)


def _largest(bound: Array, value: Callable[[int], float], most: int) -> float:
    found = 0.0
    for t in np.argsort(-bound, kind="stable")[:most]:
        if bound[t] <= found:
            break
        found = max(found, float(value(int(t))))
    return found


def readable_gain(peak_m: float, stretch: float, *, target_m: float, enlarge_only: bool) -> float:
    """How many times the ring is enlarged.

    Parameters
    ----------
    peak_m : float
        Largest true surface displacement, m.
    stretch : float
        Largest true relative displacement of neighbours over their distance.
    target_m : float
        Wanted largest displacement, m.
    enlarge_only : bool
        Whether a motion that is larger than wanted is left at its true size.

    Returns
    -------
    float
        ``target_m / peak_m``, held below the gain at which neighbours would move by half their
        distance and below 100 000; 1 when nothing moves.
    """
    if peak_m <= 0.0:
        return 1.0
    gain = min(target_m / peak_m, MOST_GAIN)
    if stretch > 0.0:
        gain = min(gain, MOST_STRETCH / stretch)
    return max(gain, 1.0) if enlarge_only else gain
