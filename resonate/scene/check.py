"""Checks that need more than one table of the scene."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Final

from resonate.scene.names import choose, listing
from resonate.scene.refused import shown
from resonate.scene.shapes import is_line, spot_names

if TYPE_CHECKING:
    from collections.abc import Sequence

    from resonate.scene.clock import Clock
    from resonate.scene.faults import Faults
    from resonate.scene.model import BodySpec, MicSpec, SoundSpec, SpotSpec, StrikeSpec
    from resonate.scene.refused import Path

#: More delivered frames than this are a slip of the pen: 4.6 days at 25 frames a second.
MOST_FRAMES: Final = 10_000_000


def check_scene(
    clock: Clock | None,
    sound: SoundSpec | None,
    bodies: Sequence[BodySpec | None],
    mics: Sequence[MicSpec | None],
    faults: Faults,
) -> None:
    """Names, bands against the sample rate, and the size of the take."""
    for key, parts in (("body", bodies), ("mic", mics)):
        _check_names(key, [part.name if part else None for part in parts], faults)
    if clock is not None and clock.frame_count > MOST_FRAMES:
        faults.add(
            ("take", "length"),
            what=f"a {clock.frame_count:.3g}-frame take; at most {MOST_FRAMES} frames are allowed",
            fix="shorten the length or the handles, or check the unit",
        )
    for place, body in enumerate(bodies):
        if sound is None or body is None or body.modes.heard_hz <= 0.5 * sound.rate_hz:
            continue
        faults.add(
            ("body", place, "modes", "heard"),
            what=f"heard {body.modes.heard_hz:g} Hz is above half the rate, {0.5 * sound.rate_hz:g} Hz",
            fix="lower heard or raise sound.rate",
        )


def _check_names(key: str, names: Sequence[str | None], faults: Faults) -> None:
    for place, name in enumerate(names):
        if name is not None and name in names[:place]:
            first = names.index(name)
            faults.add(
                (key, place, "name"),
                what=f"the name {shown(name)} is taken by {key}[{first}]",
                fix=f'give each {key} its own name, such as "{name} {place + 1}"',
            )


def check_strike(strike: StrikeSpec | None, place: int, clock: Clock | None, faults: Faults) -> None:
    """Check that the time lies in the take and that one thing says where the strike comes from."""
    if strike is None:
        return
    path = ("strike", place)
    if clock is not None and not clock.begin_s <= strike.time_s < clock.end_s:
        side = "before the take begins" if strike.time_s < clock.begin_s else "after the take ends"
        faults.add(
            (*path, "time"),
            what=f"{strike.time_s:g} s is {side}: it runs from {clock.begin_s:g} s to {clock.end_s:g} s",
            fix="move the strike into the take, or change take.length or picture.handles",
        )
    if strike.direction is not None and strike.angle_rad:
        faults.add(
            (*path, "angle"),
            what="direction and angle both say where the strike comes from",
            fix="remove one of them; angle is measured from the inward normal",
        )


def check_spot(spot: SpotSpec, shape: Any, path: Path, faults: Faults) -> None:  # noqa: ANN401 (any shape)
    """Check that a shape has such a spot."""
    allowed = spot_names(shape)
    if spot.name is not None and spot.name not in allowed:
        faults.add(
            path,
            what=f"{shown(spot.name)} is not a spot of this {shape.kind}",
            fix=choose(spot.name, allowed),
        )
    if spot.fraction is not None and shape.kind in ("lumps", "formula"):
        faults.add(
            (*path, "fraction"),
            what="fractions mean nothing on single points",
            fix=f"name one of {listing(allowed)}, or give a point or a direction",
        )
    elif spot.fraction is not None and len(spot.fraction) == 1 and not is_line(shape):
        faults.add(
            (*path, "fraction"), what=f"1 fraction on a {shape.kind}", fix="give [u, v], shares along x and z"
        )
