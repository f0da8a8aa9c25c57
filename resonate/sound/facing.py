"""Where a microphone is as a moving body sees it, at as few moments as the sound needs."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from resonate.run.record import Segment
    from resonate.run.track import BodyTrack

    Array = NDArray[np.float64]
    ComplexArray = NDArray[np.complex128]

# Poses of a moving body are looked at this often, and which modes still live every so many looks.
LOOK_S = 2e-3
LIVES = 32
# From knot to knot the directivity of what still rings turns by this much: wavenumber times half extent
# times angle, as the fourth-power mean over the amplitudes. Cubic interpolation then errs by
# 0.0234 * 0.6^4 = 0.3 % of the sum of the amplitudes at that time.
TURN = 0.6
# Turns below this need no more than the two ends: 0.05^2 / 8 = 0.03 %.
STILL = 0.05
# Change of a pose at rest by rounding alone.
RESTING = 1e-9


@dataclass(frozen=True, slots=True)
class Facing:
    """Microphone seen from a body, from its mass centre along its own axes.

    Parameters
    ----------
    knots_s : Array
        (k,) ascending emission times; one for a body at rest.
    away_m : Array
        (k, 3) vector from the mass centre to the microphone, in the body frame.
    breaks : tuple[int, ...]
        Knots at which the motion may have a corner (contacts); nothing is interpolated across them.
    """

    knots_s: Array
    away_m: Array
    breaks: tuple[int, ...]

    @property
    def count(self) -> int:
        """Number of knots."""
        return len(self.knots_s)

    def cells(self, times_s: Array) -> NDArray[np.int64]:
        """Knot before each time, at least 0 and at most the last but one."""
        return np.clip(np.searchsorted(self.knots_s, times_s, side="right") - 1, 0, self.count - 2)

    def stencil(self, knot: int) -> range:
        """Up to four knots round the span after ``knot``, all on its side of every break."""
        if self.count == 1:
            return range(1)
        place = int(np.searchsorted(self.breaks, knot, side="right"))
        low, high = self.breaks[place - 1], self.breaks[place]
        first = max(low, min(knot - 1, high - 3))
        return range(first, min(first + 4, high + 1))

    def shares(self, knot: int, times_s: Array) -> Array:
        """Lagrange weights (t, w) of the stencil's knots at times in the span after ``knot``."""
        times_s = np.clip(times_s, self.knots_s[knot], self.knots_s[knot + 1])
        nodes = self.knots_s[list(self.stencil(knot))]
        gaps = times_s[:, None] - nodes
        shares = np.ones((len(times_s), len(nodes)))
        for here in range(len(nodes)):
            for other in range(len(nodes)):
                if other != here:
                    shares[:, here] *= gaps[:, other] / (nodes[here] - nodes[other])
        return shares


def at_rest(track: BodyTrack, mic_m: Array) -> Facing:
    """Facing of a body that does not move."""
    return Facing(np.zeros(1), _seen(track, mic_m, np.zeros(1)), (0, 0))


def facing(
    track: BodyTrack,
    mic_m: Array,
    *,
    span_s: tuple[float, float],
    sharp_s: float,
    weigh: Callable[[Array], ComplexArray],
) -> Facing:
    """Choose knots for a free body.

    Parameters
    ----------
    track : BodyTrack
        The body.
    mic_m : Array
        (3,) microphone in the world.
    span_s : tuple[float, float]
        Emission times needed, s.
    sharp_s : float
        Half the extent of what radiates over the speed of sound, s.
    weigh : Callable[[Array], ComplexArray]
        Mode weights (m,) for a microphone at a vector from the mass centre, in the body frame.
    """
    times: list[Array] = []
    away: list[Array] = []
    breaks = [0]
    for begin_s, end_s in pairwise(_sections(track.segments, span_s)):
        looks = np.linspace(begin_s, end_s, 2 + int((end_s - begin_s) / LOOK_S))
        seen = _seen(track, mic_m, looks)
        distance = np.linalg.norm(seen, axis=1)
        angle = np.linalg.norm(np.diff(seen / distance[:, None], axis=0), axis=1)
        fade = np.abs(np.diff(np.log(distance)))
        if np.sum(angle + fade) < RESTING:
            chosen = np.array([0, len(looks) - 1])
        else:
            # High modes die first: each value holds until the next look at what still lives.
            lives = _sharpness(track, looks[:-1:LIVES], seen[[0, -1]], weigh)
            chosen = _knots(sharp_s * np.repeat(lives, LIVES)[: len(angle)] * angle + fade)
        if times:
            # The end of one section is the beginning of the next.
            chosen = chosen[1:]
        times.append(looks[chosen])
        away.append(seen[chosen])
        breaks.append(breaks[-1] + len(chosen) - (len(times) == 1))
    return _merged(Facing(np.concatenate(times), np.concatenate(away), tuple(breaks)))


def _merged(facing: Facing) -> Facing:
    # A body that never turned or moved needs one knot.
    if np.max(np.abs(facing.away_m - facing.away_m[0])) < RESTING * np.max(np.abs(facing.away_m[0])):
        return Facing(facing.knots_s[:1], facing.away_m[:1], (0, 0))
    return facing


def _sections(segments: tuple[Segment, ...], span_s: tuple[float, float]) -> Array:
    # Ends of the span and of all contacts within it.
    inside = [segment.begin_s for segment in segments if span_s[0] < segment.begin_s < span_s[1]]
    return np.unique(np.array([span_s[0], *inside, span_s[1]]))


def _seen(track: BodyTrack, mic_m: Array, times_s: Array) -> Array:
    # From the mass centre to the microphone, turned into the body frame (t, 3).
    place, turn = track.pose(times_s)
    away = mic_m - place
    axis, real = -turn[:, :3], turn[:, 3:]
    return np.asarray(away + 2.0 * np.cross(axis, np.cross(axis, away) + real * away))


def _sharpness(
    track: BodyTrack, times_s: Array, ends_m: Array, weigh: Callable[[Array], ComplexArray]
) -> Array:
    # Fourth-power mean of the angular frequency over the amplitudes heard at times of one section.
    place = max(0, sum(segment.begin_s <= times_s[0] for segment in track.segments) - 1)
    segment, modes = track.segments[place], track.modes
    sounding = slice(modes.swing, modes.heard)
    omega, decay = modes.omega[sounding], modes.decay.total[sounding]
    heard = np.max(np.abs([weigh(end)[sounding] for end in ends_m]), axis=0)
    amplitude = heard * omega * np.abs(segment.z[sounding])
    scale = np.max(amplitude, initial=0.0)
    if scale == 0.0:
        return np.zeros(len(times_s))
    # Only ratios matter: the slowest decay is taken off, so that nothing underflows.
    left = (amplitude / scale) * np.exp(-np.outer(times_s - segment.begin_s, decay - np.min(decay)))
    return np.asarray(((left @ omega**4) / np.maximum(np.sum(left, axis=1), 1e-300)) ** 0.25)


def _knots(change: Array) -> NDArray[np.int64]:
    # Which looks of a section to keep, its ends always, from the change between each look and the next.
    last = len(change)
    total = np.concatenate(([0.0], np.cumsum(change)))
    if total[-1] < STILL:
        return np.array([0, last])
    marks = np.linspace(0.0, total[-1], 1 + max(3, int(np.ceil(total[-1] / TURN))))
    return np.unique(np.concatenate(([0], np.searchsorted(total, marks[1:-1]), [last])))
