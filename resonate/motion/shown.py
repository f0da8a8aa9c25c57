"""The shapes of one body that a take shows, and how far each of them goes."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from resonate.motion.ring import readable_ring, unresolved_m
from resonate.motion.shutter import damped, displacement, shutter_mean
from resonate.motion.visible import (
    READABLE_SHARE,
    body_size_m,
    fold,
    peak_displacement_m,
    peak_stretch,
    reach,
    readable_gain,
    strongest,
    surface_shapes,
    swings,
)

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from resonate.body.body import Body
    from resonate.motion.visible import Kind
    from resonate.run.track import BodyTrack
    from resonate.scene.model import ShowSpec

    Array = NDArray[np.float64]
    Indices = NDArray[np.int64]

# Keys evaluated at once: 300 modes of this many states are 5 MB.
_BLOCK = 1024
# True motion smaller than this part of the body's size is not given a shape of its own.
_LEAST_MOTION = 1e-9


@dataclass(frozen=True, slots=True)
class Timeline:
    """Frames and keys of a take.

    ``scene_s`` and ``file_s`` (N,) the keys in scene and in file time; ``frame_keys`` (T,) which of
    them are frames; ``frame_rate_hz``; ``shutter_s`` how long the shutter is open.
    """

    scene_s: Array
    file_s: Array
    frame_keys: Indices
    frame_rate_hz: float
    shutter_s: float

    def blocks(self) -> Iterator[slice]:
        """Stretches of keys small enough to evaluate at once."""
        for begin in range(0, len(self.scene_s), _BLOCK):
            yield slice(begin, min(begin + _BLOCK, len(self.scene_s)))


@dataclass(frozen=True, slots=True)
class Survey:
    """One body over the take, before anything is chosen.

    ``shapes`` (n, 3, m) of the modes on the display mesh, ``reach`` (m,) how far each goes at the most, kg**-0.5;
    ``peak`` (m,) largest visible coordinate of each mode, m kg**0.5; ``swinging`` (m,) which modes carry
    the body about as a whole; ``unresolved_m`` (N,) size of the vibration that frames cannot follow, m.
    """

    track: BodyTrack
    body: Body
    show: ShowSpec
    line: Timeline
    shapes: Array
    reach: Array
    peak: Array
    swinging: NDArray[np.bool_]
    unresolved_m: Array


@dataclass(frozen=True, slots=True)
class Shown:
    """The shapes chosen: coordinates (N, K), m kg**0.5, shapes (n, 3, K), kg**-0.5, and what they are."""

    coordinates: Array
    shapes: Array
    numbers: Indices
    kinds: tuple[Kind, ...]
    true_hz: Array
    shown_hz: Array

    @property
    def labels(self) -> tuple[str, ...]:
        """Names of the shapes: ``mode_3`` as numbered in the listing."""
        return tuple(f"mode_{number}" for number in self.numbers)


def survey(track: BodyTrack, body: Body, show: ShowSpec, line: Timeline) -> Survey:
    """Go once over the take, in blocks of keys, to see how large everything becomes.

    Parameters
    ----------
    track : BodyTrack
        What the run left of the body.
    body : Body
        The body.
    show : ShowSpec
        How its ring is to be shown.
    line : Timeline
        The keys.
    """
    modes = track.modes
    shapes = surface_shapes(body, modes)
    speed = damped(modes.omega, modes.decay.total)
    fast = np.flatnonzero(modes.frequency_hz > 0.5 * line.frame_rate_hz)
    squares = np.sum(shapes[:, :, fast] ** 2, axis=1)
    peak, unresolved = np.zeros(modes.count), np.zeros(len(line.scene_s))
    for block in line.blocks():
        times = line.scene_s[block]
        z = track.modal(times)
        unresolved[block] = unresolved_m(squares, z[fast], speed[fast])
        visible = np.abs(z) / speed[:, None]
        if show.ring == "true":
            visible = np.abs(shutter_mean(track, times, shutter_s=line.shutter_s))
        peak = np.maximum(peak, np.max(visible, axis=1))
    return Survey(
        track=track,
        body=body,
        show=show,
        line=line,
        shapes=shapes,
        reach=reach(shapes),
        peak=peak,
        swinging=swings(
            shapes, body.surface.points_m, modes.frequency_hz, frame_rate_hz=line.frame_rate_hz
        ),
        unresolved_m=unresolved,
    )


def choose(found: Survey) -> Shown:
    """Shapes to show: the strongest of the ring, then all true motion of the body as a whole."""
    ring, carried = _ringing(found), _carried(found)
    return Shown(
        coordinates=np.concatenate([ring.coordinates, carried.coordinates], axis=1),
        shapes=np.concatenate([ring.shapes, carried.shapes], axis=2),
        numbers=np.concatenate([ring.numbers, carried.numbers]),
        kinds=ring.kinds + carried.kinds,
        true_hz=np.concatenate([ring.true_hz, carried.true_hz]),
        shown_hz=np.concatenate([ring.shown_hz, carried.shown_hz]),
    )


def _ringing(found: Survey) -> Shown:
    track, show, line = found.track, found.show, found.line
    hertz = track.modes.frequency_hz
    peak_m = np.where(found.swinging, 0.0, found.reach * found.peak)
    chosen = strongest(peak_m, most=0 if show.ring == "off" else show.most)
    shown_hz = hertz[chosen]
    if show.ring == "readable" and len(chosen):
        lowest_hz = float(hertz[~found.swinging][0])
        shown_hz = fold(shown_hz, lowest_hz=lowest_hz, frame_rate_hz=line.frame_rate_hz)
    coordinates = np.zeros((len(line.scene_s), len(chosen)))
    for block in line.blocks() if len(chosen) else ():
        times = line.scene_s[block]
        if show.ring == "true":
            coordinates[block] = shutter_mean(track, times, shutter_s=line.shutter_s)[chosen].T
        else:
            z = track.modal(times)[chosen]
            coordinates[block] = readable_ring(track, times, z, chosen=chosen, shown_hz=shown_hz).T
    moving = np.flatnonzero(np.any(coordinates != 0.0, axis=0))
    kinds: list[Kind] = ["ring"] * len(moving)
    return Shown(
        coordinates=coordinates[:, moving],
        shapes=found.shapes[:, :, chosen[moving]],
        numbers=chosen[moving] + 1,
        kinds=tuple(kinds),
        true_hz=hertz[chosen[moving]],
        shown_hz=shown_hz[moving],
    )


def _carried(found: Survey) -> Shown:
    """Swings of a hung body."""
    track, line = found.track, found.line
    modes, least_m = track.modes, _LEAST_MOTION * body_size_m(found.body.surface)
    swing = np.flatnonzero(found.swinging & (found.reach * found.peak > least_m))
    q = np.zeros((len(line.scene_s), len(swing)))
    for block in line.blocks() if len(swing) else ():
        z = track.modal(line.scene_s[block])[swing]
        q[block] = displacement(z, modes.omega[swing], modes.decay.total[swing]).T
    hertz = modes.frequency_hz[swing]
    swung: list[Kind] = ["swing"] * len(swing)
    return Shown(
        coordinates=q,
        shapes=found.shapes[:, :, swing],
        numbers=swing + 1,
        kinds=tuple(swung),
        true_hz=hertz,
        shown_hz=hertz,
    )


def ring_gain(found: Survey, shown: Shown) -> float:
    """How many times the ring is enlarged: 1 for the camera's view unless a size is asked for."""
    show, surface = found.show, found.body.surface
    rings = shown.kinds.count("ring")
    if not rings or (show.ring == "true" and show.size is None):
        return 1.0
    shapes, weights = shown.shapes[:, :, :rings], shown.coordinates[:, :rings]
    share = READABLE_SHARE if show.size is None else show.size
    return readable_gain(
        peak_displacement_m(shapes, weights),
        peak_stretch(shapes, weights, surface),
        target_m=share * body_size_m(surface),
        enlarge_only=show.size is None,
    )
