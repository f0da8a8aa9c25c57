"""From a record to curves: poses and shapes at exact frame times."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
from threadpoolctl import threadpool_limits

from resonate.errors import RunError
from resonate.motion.channels import BodyCurves, Curves
from resonate.motion.shown import Timeline, choose, ring_gain, survey

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from resonate.body.body import Body
    from resonate.run.record import Event, Record
    from resonate.run.track import BodyTrack
    from resonate.scene.clock import Clock
    from resonate.scene.model import Scene, ShowSpec

    Array = NDArray[np.float64]


def timeline(clock: Clock, events: Sequence[Event], *, shutter_turn: float) -> Timeline:
    """Frame times of a clock and the extra keys at the begins of contacts.

    Parameters
    ----------
    clock : Clock
        Gives the frames as exact fractions.
    events : Sequence[Event]
        Contacts; those inside the take add a key at the exact time they begin.
    shutter_turn : float
        Open part of the frame, 0.5 for 180 degrees.

    Returns
    -------
    Timeline
        Keys in increasing order without doubles.
    """
    rate = clock.frame.fraction
    frames = np.array([float(clock.frame_time(k)) for k in range(clock.frame_count)])
    frames_file = np.array([float(k / rate) for k in range(clock.frame_count)])
    begin, end = float(clock.begin), float(clock.end)
    extra = np.array(sorted({e.begin_s for e in events if begin <= e.begin_s < end}), dtype=np.float64)
    extra = extra[~np.isin(extra, frames) & ~np.isin(extra - begin, frames_file)]
    scene_s = np.concatenate([frames, extra])
    order = np.argsort(scene_s, kind="stable")
    return Timeline(
        scene_s=scene_s[order],
        file_s=np.concatenate([frames_file, extra - begin])[order],
        frame_keys=np.flatnonzero(order < len(frames)),
        frame_rate_hz=float(rate),
        shutter_s=float(shutter_turn) / float(rate),
    )


def curves(record: Record, bodies: Sequence[Body], scene: Scene) -> Curves:
    """Motion of every body at the frames of the picture and at the begins of contacts.

    Poses are instantaneous; only vibration is averaged over the shutter, and only where it is shown
    as a camera sees it. Memory follows the number of frames, never frames times modes.

    Parameters
    ----------
    record : Record
        What the run left behind.
    bodies : Sequence[Body]
        The bodies, in the order of the record.
    scene : Scene
        Gives the clock, the shutter and what to show of each body.

    Returns
    -------
    Curves
        SI units, Y up; what a file format wants instead is its writer's affair.

    Raises
    ------
    RunError
        If bodies, record and scene do not belong together.
    """
    if not len(record.bodies) == len(bodies) == len(scene.bodies):
        raise RunError(
            what=f"{len(record.bodies)} tracks, {len(bodies)} bodies, {len(scene.bodies)} in the scene",
            where="curves",
            fix="pass the bodies of the scene that was run, in its order",
        )
    line = timeline(scene.clock, record.events, shutter_turn=scene.picture.shutter_turn)
    with threadpool_limits(1):
        parts = tuple(
            body_curves(track, body, spec.show, line)
            for track, body, spec in zip(record.bodies, bodies, scene.bodies, strict=True)
        )
    return Curves(
        times_s=line.file_s[line.frame_keys],
        key_times_s=line.file_s,
        frame_keys=line.frame_keys,
        bodies=parts,
    )


def body_curves(track: BodyTrack, body: Body, show: ShowSpec, line: Timeline) -> BodyCurves:
    """Curves of one body; see `curves`."""
    found = survey(track, body, show, line)
    shown = choose(found)
    gain = ring_gain(found, shown)
    enlarged = np.array([gain if kind == "ring" else 1.0 for kind in shown.kinds])
    largest = np.max(np.abs(shown.coordinates), axis=0, initial=0.0)
    weights = shown.coordinates / np.where(largest > 0.0, largest, 1.0)
    place, turn = track.pose(line.scene_s)
    frames = line.frame_keys
    frame_s = line.scene_s[frames]
    next_s = np.append(frame_s[1:], frame_s[-1] + 1.0 / line.frame_rate_hz)
    return BodyCurves(
        name=track.name,
        place_m=place[frames],
        turn=same_hemisphere(turn[frames]),
        weights=weights[frames],
        mode_numbers=shown.numbers,
        labels=shown.labels,
        kinds=shown.kinds,
        ring=show.ring,
        gain=gain,
        true_hz=shown.true_hz,
        shown_hz=shown.shown_hz,
        unresolved_m=found.unresolved_m[frames],
        force_peak_n=track.force_peak(frame_s, next_s),
        mesh=replace(body.surface, points_m=body.surface.points_m - body.inertia.centre_m),
        targets=np.moveaxis(shown.shapes * (enlarged * largest), 2, 0),
        key_place_m=place,
        key_turn=same_hemisphere(turn),
        key_weights=weights,
    )


def same_hemisphere(turn: Array) -> Array:
    """Quaternions (t, 4) with signs such that neighbours lie in one hemisphere.

    A quaternion and its negative are the same turn, but a straight line between them is not.
    """
    against = np.sum(turn[1:] * turn[:-1], axis=1) < 0.0
    sign = np.where(np.cumsum(against) % 2 == 1, -1.0, 1.0)
    return np.concatenate([turn[:1], turn[1:] * sign[:, None]])
