"""Looks a whole scene over before anything is solved: supports, spots, blows and microphones against the bodies.

What is wrong is told all at once, each with its line and key path.
"""

from __future__ import annotations

import math
import re
from contextlib import contextmanager
from typing import TYPE_CHECKING, Final, cast

import numpy as np

from resonate.body.build import build_body
from resonate.errors import BodyError, Fault, ModesError, RunError, SceneError
from resonate.field.samples import near_m
from resonate.scene.faults import Faults
from resonate.scene.locate import Locator
from resonate.scene.resolve import rotated

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from resonate.body.body import Body
    from resonate.body.flat import FlatBody
    from resonate.body.line import LineBody
    from resonate.body.vessel import VesselBody
    from resonate.modes.modeset import ModeSet
    from resonate.scene.model import BodySpec, MicSpec, Scene, StrikeSpec
    from resonate.scene.refused import Path

    Array = NDArray[np.float64]
    Built = LineBody | FlatBody | VesselBody

# A blow must lean into the surface by at least this sine; the run cannot tell less from none.
_GRAZING: Final = 1e-6
# A damper that moves by less than this share of the fastest point is at rest: very soft springs blur the difference.
_AT_REST: Final = 1e-3
_STRIKE: Final = re.compile(r"strike\[(\d+)\].*")
_BODY: Final = re.compile(r"body '([^']*)'")


def survey(scene: Scene) -> tuple[Built, ...]:
    """Build every body, and see whether everything else in the scene fits it.

    Parameters
    ----------
    scene : Scene
        What is asked.

    Returns
    -------
    tuple of Body
        In the order of the scene.

    Raises
    ------
    SceneError
        With every fault found.
    """
    found = _Found(scene)
    built = [_build(spec, place, scene, found) for place, spec in enumerate(scene.bodies)]
    for place, strike in enumerate(scene.strikes):
        body = built[strike.body_index]
        if body is not None:
            _check_strike(strike, place, body, scene, found)
    if "wav" in scene.take.files:
        for place, mic in enumerate(scene.mics):
            for body in built:
                if body is not None:
                    _check_mic(mic, place, body, found)
    if found.faults:
        raise SceneError(faults=found.faults.all)
    return tuple(body for body in built if body is not None)


class _Found:
    # Gathers faults under the key that stands in the file nearest to the one meant.

    def __init__(self, scene: Scene) -> None:
        self.locator = Locator(scene.text)
        self.faults = Faults(scene.where, self.locator)

    def add(self, path: Path, *, what: str, fix: str) -> None:
        while path and not self.locator.knows(path):
            path = path[:-1]
        self.faults.add(path, what=what, fix=fix)

    def refuse(self, path: Path, error: BodyError) -> None:
        for fault in error.faults:
            self.add(path, what=fault.what, fix=fault.fix)


def _build(spec: BodySpec, place: int, scene: Scene, found: _Found) -> Built | None:
    path: Path = ("body", place)
    world = scene.world
    try:
        built = build_body(spec, temperature_k=world.temperature_k, gravity_m_s2=world.gravity_m_s2)
    except BodyError as error:
        found.refuse(path, error)
        return None
    body = cast("Built", built)
    for number, hold in enumerate(spec.support):
        try:
            body.select(hold)
        except BodyError as error:
            # A support may be one table, or one of a list.
            found.refuse((*path, "support", number, "where"), error)
    return body


def _check_strike(strike: StrikeSpec, place: int, body: Built, scene: Scene, found: _Found) -> None:
    try:
        spot = body.spot(strike.spot)
    except BodyError as error:
        found.refuse(("strike", place, "spot"), error)
        return
    if strike.direction is None or not _stands(strike, place, scene):
        return
    x, y, z, w = scene.bodies[strike.body_index].turn
    steep = -float(np.dot(rotated(strike.direction, (-x, -y, -z, w)), spot.normal))
    if steep > _GRAZING:
        return
    degrees = math.degrees(math.asin(min(1.0, abs(steep))))
    if steep < -_GRAZING:
        found.add(
            ("strike", place, "direction"),
            what=f"the direction points away from the surface at the spot, by {degrees:.3g} deg",
            fix="turn it round, or leave it out to strike along the inward normal",
        )
        return
    side = "into" if steep >= 0.0 else "off"
    found.add(
        ("strike", place, "direction"),
        what=f"the direction only grazes the surface at the spot: {degrees:.2g} deg {side} it",
        fix="tilt it further into the surface, or leave it out to strike along the inward normal",
    )


def _stands(strike: StrikeSpec, place: int, scene: Scene) -> bool:
    """Whether a body is turned at a strike as it was at the start; otherwise only the run can tell."""
    spec = scene.bodies[strike.body_index]
    if spec.support or spec.held:
        return True
    others = (other for number, other in enumerate(scene.strikes) if number != place)
    earlier = any(other.body_index == strike.body_index and other.time_s <= strike.time_s for other in others)
    return not earlier and not any(spec.spin_rad_s)


def _check_mic(mic: MicSpec, place: int, body: Built, found: _Found) -> None:
    # A body that moves may come too near later; that is found when it is heard.
    spec = body.spec
    x, y, z, w = spec.turn
    apart = tuple(mic_m - body_m for mic_m, body_m in zip(mic.place_m, spec.place_m, strict=True))
    seen = np.array(rotated((apart[0], apart[1], apart[2]), (-x, -y, -z, w)))
    nearest = float(np.min(np.linalg.norm(body.radiator.points_m - seen, axis=1)))
    least = near_m(body)
    if not nearest >= least:
        found.add(
            ("mic", place, "place"),
            what=f"the microphone is {nearest:.4g} m from the middle of {body.name!r}; closer than {least:.4g} m it "
            "cannot be served",
            fix=f"move it at least {least:.2g} m away from the body",
        )


def check_dampers(body: Body, modes: ModeSet) -> None:
    """See that no damper would have to slow a body as a whole: the run slows vibration alone.

    Raises
    ------
    BodyError
        If a damper is moved by a motion that nothing holds.
    """
    rows = getattr(body, "supports", None)
    if rows is None or not rows.damper_rows.shape[0] or not modes.rigid.shape[1]:
        return
    moved = float(np.max(np.abs(rows.damper_rows @ modes.rigid)))
    if moved > _AT_REST * float(np.max(np.abs(modes.rigid))):
        raise BodyError(
            what="a damper alone does not keep the body in place, and its drift as a whole would not be slowed",
            where=f"body {body.name!r}",
            fix='give it a spring as well, such as {spring = "10 kN/m", damper = 2}, or hold the body elsewhere',
        )


@contextmanager
def placing(scene: Scene) -> Iterator[None]:
    """Add file and line to errors of bodies, modes and the run, which know only what they are called."""
    try:
        yield
    except (BodyError, ModesError, RunError) as error:
        raise type(error)(faults=tuple(_placed(fault, scene) for fault in error.faults)) from error


def _placed(fault: Fault, scene: Scene) -> Fault:
    strike, body = _STRIKE.fullmatch(fault.where), _BODY.fullmatch(fault.where)
    names = [spec.name for spec in scene.bodies]
    path: Path
    if strike is not None:
        path = ("strike", int(strike.group(1)))
    elif body is not None and body.group(1) in names:
        path = ("body", names.index(body.group(1)))
    else:
        return Fault(what=fault.what, where=f"{scene.where}: {fault.where}", fix=fault.fix)
    return Faults(scene.where, Locator(scene.text)).add(path, what=fault.what, fix=fault.fix)
