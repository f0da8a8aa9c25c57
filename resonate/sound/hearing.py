"""How each microphone hears each body: arrival time, and mode weights that follow the motion."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from resonate.field.air import Air
from resonate.sound.facing import Facing, at_rest, facing

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Sequence

    from numpy.typing import NDArray

    from resonate.field.transfer import Transfer
    from resonate.run.track import BodyTrack
    from resonate.scene.clock import Clock
    from resonate.scene.model import Scene

    Array = NDArray[np.float64]
    ComplexArray = NDArray[np.complex128]


@dataclass(frozen=True, slots=True)
class Hearing:
    """One body at one microphone.

    Parameters
    ----------
    shift : Fraction
        Arrival time minus emission time, s (the common delay may be left out of it).
    facing : Facing
        Where the microphone is in the body frame, at chosen emission times (knots).
    weights : Callable[[int], ComplexArray]
        Weights (m,) at a knot, Pa s^2 m^-1 kg^-1/2.
    """

    shift: Fraction
    facing: Facing
    weights: Callable[[int], ComplexArray]

    def spans(self, begin: int, end: int, clock: Clock) -> Iterator[tuple[int, int, int]]:
        """Split samples at the knots: (first, last, knot before), last excluded."""
        if end <= begin:
            return
        if self.facing.count == 1:
            yield begin, end, 0
            return
        cells = self.facing.cells(self._emitted(begin, end, clock))
        edges = np.concatenate(([0], np.flatnonzero(np.diff(cells)) + 1, [len(cells)]))
        for first, last in pairwise(edges.tolist()):
            yield begin + first, begin + last, int(cells[first])

    def columns(self, knot: int) -> ComplexArray:
        """Weights (m, w) at the knots that the span after ``knot`` is interpolated between."""
        return np.stack([self.weights(each) for each in self.facing.stencil(knot)], axis=1)

    def mix(self, part: Array, *, knot: int, first: int, clock: Clock) -> Array:
        """Blend signals (n, w) for constant weights over the span that starts at sample ``first``: (n,)."""
        if part.shape[1] == 1:
            return part[:, 0]
        shares = self.facing.shares(knot, self._emitted(first, first + len(part), clock))
        return np.asarray(np.einsum("nw,nw->n", part, shares))

    def _emitted(self, begin: int, end: int, clock: Clock) -> Array:
        emitted: Array = float(clock.begin - self.shift) + np.arange(begin, end) / clock.sample_rate
        return emitted


def hearings(
    tracks: Sequence[BodyTrack], transfers: Sequence[Transfer], scene: Scene
) -> tuple[tuple[Hearing, ...], ...]:
    """Place every body before every microphone: a tuple a body, in it one a microphone."""
    places = np.array([mic.place_m for mic in scene.mics], dtype=np.float64)
    return tuple(
        tuple(
            _hearing(track, transfer, mic_m=place, shift_s=float(shift_s), scene=scene)
            for place, shift_s in zip(places, of_body, strict=True)
        )
        for track, transfer, of_body in zip(tracks, transfers, arrivals_s(tracks, scene), strict=True)
    )


def arrivals_s(tracks: Sequence[BodyTrack], scene: Scene) -> Array:
    """Arrival minus emission time of each body at each microphone: (bodies, microphones), s.

    From the distance to the mass centre at scene time 0. With ``delay = false`` the smallest of all is taken
    off every one.
    """
    places = np.array([mic.place_m for mic in scene.mics], dtype=np.float64)
    centres = np.array([track.pose(np.zeros(1))[0][0] for track in tracks]).reshape(-1, 1, 3)
    distances = np.linalg.norm(places - centres, axis=2)
    common_m = 0.0 if scene.sound.delay else np.min(distances, initial=np.inf)
    late: Array = (distances - common_m) / Air.of(scene.world).speed_m_s
    return late


def _hearing(track: BodyTrack, transfer: Transfer, *, mic_m: Array, shift_s: float, scene: Scene) -> Hearing:
    centre_m = np.asarray(track.inertia.centre_m, dtype=np.float64)

    def weigh(away_m: Array) -> ComplexArray:
        return transfer.weights(away_m + centre_m, float(np.linalg.norm(away_m)))

    if not track.moves:
        seen = at_rest(track, mic_m)
    else:
        # Nothing is known, and nothing sounds, before the run.
        first_s = max(scene.clock.begin_s - shift_s, scene.clock.run_begin_s)
        last_s = max(scene.clock.end_s - shift_s, first_s)
        sharp = transfer.radius_m / Air.of(scene.world).speed_m_s
        seen = facing(track, mic_m, span_s=(first_s, last_s), sharp_s=sharp, weigh=weigh)

    @lru_cache(maxsize=8)
    def weights(knot: int) -> ComplexArray:
        return weigh(seen.away_m[knot])

    return Hearing(Fraction(shift_s), seen, weights)
