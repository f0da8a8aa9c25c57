"""How each microphone hears each body: arrival time, and mode weights that follow the motion."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from resonate.field.air import Air

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Sequence

    from numpy.typing import NDArray

    from resonate.field.transfer import Transfer
    from resonate.run.record import BodyTrack
    from resonate.scene.clock import Clock
    from resonate.scene.model import Scene

    Array = NDArray[np.float64]
    ComplexArray = NDArray[np.complex128]

# Poses of a moving body are looked at this often.
LOOK_S = 2e-3
# Between two knots the highest mode's directivity turns by this much (wavenumber times half extent
# times angle, plus the change of ln distance); linear weights then err by about 0.25^2 / 8,
# -42 dB, at the top of the band and by the square of the frequency less below.
TURN = 0.25


@dataclass(frozen=True, slots=True)
class Hearing:
    """One body at one microphone.

    Parameters
    ----------
    shift : Fraction
        Arrival time minus emission time, s (the common delay may be left out of it).
    knots_s : Array
        (k,) ascending emission times at which the weights are known; one for a body at rest.
    weights : Callable[[int], ComplexArray]
        Weights (m,) at a knot, Pa s^2 m^-1 kg^-1/2.
    """

    shift: Fraction
    knots_s: Array
    weights: Callable[[int], ComplexArray]

    def spans(self, begin: int, end: int, clock: Clock) -> Iterator[tuple[int, int, int, int]]:
        """Split samples at the knots: (first, last, lower knot, upper knot), last excluded."""
        if len(self.knots_s) == 1:
            if end > begin:
                yield begin, end, 0, 0
            return
        times = self._emitted(np.arange(begin, end), clock)
        cells = np.clip(np.searchsorted(self.knots_s, times, side="right") - 1, 0, len(self.knots_s) - 2)
        edges = np.concatenate(([0], np.flatnonzero(np.diff(cells)) + 1, [len(cells)]))
        for first, last in pairwise(edges):
            if last > first:
                lower = int(cells[first])
                yield begin + int(first), begin + int(last), lower, lower + 1

    def columns(self, lower: int, upper: int) -> ComplexArray:
        """Weights (m, 1) at rest, or (m, 2) at the two knots of a span."""
        if lower == upper:
            return self.weights(lower)[:, None]
        return np.stack((self.weights(lower), self.weights(upper)), axis=1)

    def mix(self, part: Array, *, lower: int, first: int, clock: Clock) -> Array:
        """Blend signals (n, 1 or 2) of a span that starts at sample ``first``: (n,)."""
        if part.shape[1] == 1:
            return part[:, 0]
        times = self._emitted(np.arange(first, first + len(part)), clock)
        begin, end = self.knots_s[lower], self.knots_s[lower + 1]
        share = np.clip((times - begin) / (end - begin), 0.0, 1.0)
        blended: Array = part[:, 0] + share * (part[:, 1] - part[:, 0])
        return blended

    def _emitted(self, samples: NDArray[np.int64], clock: Clock) -> Array:
        emitted: Array = float(clock.begin - self.shift) + samples / clock.sample_rate
        return emitted


def hearings(
    tracks: Sequence[BodyTrack], transfers: Sequence[Transfer], scene: Scene
) -> tuple[tuple[Hearing, ...], ...]:
    """Place every body before every microphone: a tuple a body, in it one a microphone.

    Distances for arrival times are those from the mass centre at scene time 0.
    """
    places = np.array([mic.place_m for mic in scene.mics], dtype=np.float64)
    speed_m_s = Air.of(scene.world).speed_m_s
    centres = [track.pose(np.zeros(1))[0][0] for track in tracks]
    distances = [np.linalg.norm(places - centre, axis=1) for centre in centres]
    common_m = 0.0 if scene.sound.delay or not distances else min(float(np.min(each)) for each in distances)
    return tuple(
        tuple(
            _hearing(
                track,
                transfer,
                _Path(place, (float(distance) - common_m) / speed_m_s, speed_m_s),
                scene.clock,
            )
            for place, distance in zip(places, of_body, strict=True)
        )
        for track, transfer, of_body in zip(tracks, transfers, distances, strict=True)
    )


@dataclass(frozen=True, slots=True)
class _Path:
    # To a microphone in the world, how long sound takes, and how fast it is.
    mic_m: Array
    shift_s: float
    speed_m_s: float


def _hearing(track: BodyTrack, transfer: Transfer, path: _Path, clock: Clock) -> Hearing:
    looks = np.zeros(1)
    if track.free:
        # Nothing is known, and nothing sounds, before the run.
        first_s = max(clock.begin_s - path.shift_s, clock.run_begin_s)
        last_s = max(clock.end_s - path.shift_s, first_s)
        looks = np.linspace(first_s, last_s, 2 + int((last_s - first_s) / LOOK_S))
    seen = _seen(track, path.mic_m, looks)
    centre_m = np.asarray(track.inertia.centre_m)
    chosen = np.zeros(1, dtype=np.int64)
    if len(looks) > 1 and track.modes.heard:
        sharp = track.modes.omega[track.modes.heard - 1] / path.speed_m_s * transfer.radius_m
        chosen = _knots(seen - centre_m, sharp)

    @lru_cache(maxsize=4)
    def weights(knot: int) -> ComplexArray:
        place = seen[chosen[knot]]
        return transfer.weights(place, float(np.linalg.norm(place - centre_m)))

    return Hearing(Fraction(path.shift_s), looks[chosen], weights)


def _seen(track: BodyTrack, mic_m: Array, times_s: Array) -> Array:
    # The microphone in the body frame (t, 3).
    place, turn = track.pose(times_s)
    away = mic_m - place
    axis, real = -turn[:, :3], turn[:, 3:]
    back = away + 2.0 * np.cross(axis, np.cross(axis, away) + real * away)
    return np.asarray(back + track.inertia.centre_m)


def _knots(away: Array, sharp: float) -> NDArray[np.int64]:
    # Looks to keep as knots, from the microphone's direction and distance in the body frame.
    distance = np.maximum(np.linalg.norm(away, axis=1), 1e-9)
    direction = away / distance[:, None]
    angle = np.linalg.norm(np.diff(direction, axis=0), axis=1)
    change = np.concatenate(([0.0], np.cumsum(sharp * angle + np.abs(np.diff(np.log(distance))))))
    # Rounding of a pose at rest is not motion.
    if change[-1] < 1e-6:  # noqa: PLR2004
        return np.zeros(1, dtype=np.int64)
    marks = np.linspace(0.0, change[-1], 1 + int(np.ceil(change[-1] / TURN)))
    return np.unique(np.concatenate(([0], np.searchsorted(change, marks[1:-1]), [len(change) - 1])))
