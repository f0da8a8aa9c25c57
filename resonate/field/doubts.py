"""Where a radiation model is left, told once for all bodies of a take."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final, Literal

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from resonate.body.body import Body
    from resonate.field.air import Air
    from resonate.modes.modeset import ModeSet

    Array = NDArray[np.float64]

# Common practice: a slice is compact while wavenumber times half its thickness stays below one.
COMPACT: Final = 1.0
# Wavenumber times radius up to which simple sources on a sphere are right to a quarter of a decibel in its oval mode.
SMALL: Final = 2.0
# An edge that moves by less than this share of the face is held.
_STILL: Final = 1e-3
# Bodies named in one line.
_NAMED: Final = 4
# Before and after the list of bodies.
_WORDS: Final = {
    "free edge": (
        "free edges are heard as if set in a wall: too loud ",
        "; edge-on and on the axis levels are wrong at every frequency",
    ),
    "closed": ("solids sound as simple sources without their own shadow, up to 6 dB too quiet: ", ""),
    "shell": (
        "vessels are heard as simple sources on their outside, without the air in them, and cast no shadow: levels "
        "are good to some 5 dB, less ",
        "",
    ),
    "thick line": ("compact dipoles make high modes of lines too loud: ", ""),
}


@dataclass(frozen=True, slots=True)
class Doubt:
    """One body at one limit of its model: ``count`` of its ``heard`` modes lie beyond ``limit_hz``."""

    kind: Literal["free edge", "shell", "thick line", "closed"]
    body: str
    count: int
    heard: int
    limit_hz: float

    def __str__(self) -> str:
        """Name the body, the limit, and how many of the heard modes lie beyond it."""
        if self.kind == "closed":
            return f"{self.body!r} ({self.count} modes)"
        limit = f"{self.limit_hz:.0f} Hz ({self.count} of {self.heard} modes)"
        if self.kind == "thick line":
            return f"{self.body!r} above {limit}"
        return f"{'below' if self.kind == 'free edge' else 'above'} {limit} on {self.body!r}"


def told(doubts: Sequence[Doubt]) -> tuple[str, ...]:
    """One line for each kind of doubt, naming the bodies."""
    lines = []
    for kind, (before, after) in _WORDS.items():
        found = [doubt for doubt in doubts if doubt.kind == kind]
        if found:
            more = f" and {len(found) - _NAMED} more" if len(found) > _NAMED else ""
            lines.append(f"{before}{', '.join(map(str, found[:_NAMED]))}{more}{after}")
    return tuple(lines)


def face_doubts(body: Body, modes: ModeSet, air: Air, *, outward: Array, radius_m: float) -> tuple[Doubt, ...]:
    """Whether the edge of a flat body moves: then front and back of it are not kept apart.

    Parameters
    ----------
    body, modes, air : Body, ModeSet, Air
        What sounds, and where.
    outward : Array
        (h, n) displacement of the face along its normal in each sounding mode.
    radius_m : float
        Half the extent of the face.
    """
    if not outward.size:
        return ()
    surface = body.surface
    across = body.radiator.normals[0]
    rim = surface.points_m[np.abs(surface.normals @ across) < 0.5 * np.linalg.norm(surface.normals, axis=1)]
    if not len(rim):
        return ()
    heard = len(outward)
    moved = np.asarray(body.probe(rim) @ modes.shape[:, modes.swing : modes.swing + heard])
    edge = np.einsum("nim,i->mn", moved.reshape(len(rim), 3, heard), across)
    if not np.any(np.max(np.abs(edge), axis=1) > _STILL * np.max(np.abs(outward), axis=1)):
        return ()
    # Front and back cancel while the way round the edge is short against the wavelength: k * radius < 1.
    below_hz = air.speed_m_s / (2.0 * np.pi * radius_m)
    hertz = modes.frequency_hz[modes.swing : modes.swing + heard]
    return (Doubt("free edge", body.name, int(np.sum(hertz < below_hz)), heard, below_hz),)


def shell_doubts(body: Body, modes: ModeSet, air: Air, *, radius_m: float) -> tuple[Doubt, ...]:
    """Where a vessel of half the extent ``radius_m`` is large against the wavelength."""
    heard = modes.frequency_hz[modes.swing : modes.heard]
    above_hz = SMALL * air.speed_m_s / (2.0 * np.pi * radius_m)
    return (Doubt("shell", body.name, int(np.sum(heard > above_hz)), len(heard), above_hz),) if len(heard) else ()


def line_doubts(body: Body, modes: ModeSet, air: Air) -> tuple[Doubt, ...]:
    """Whether modes of a line are so high that its cross-section is not small against the wavelength."""
    heard = modes.frequency_hz[modes.swing : modes.heard]
    middle = body.radiator.points_m
    span = body.surface.points_m - middle[0]
    axis = middle[-1] - middle[0]
    length = float(np.linalg.norm(axis))
    if length > 0.0:
        span = span - np.outer(span @ axis, axis) / length**2
    half_m = body.radiator.half_m or float(np.sqrt(np.max(np.einsum("ni,ni->n", span, span))))
    limit_hz = COMPACT * air.speed_m_s / (2.0 * np.pi * half_m) if half_m > 0.0 else np.inf
    count = int(np.sum(heard > limit_hz))
    return (Doubt("thick line", body.name, count, len(heard), limit_hz),) if count else ()


def closed_doubts(body: Body, modes: ModeSet) -> tuple[Doubt, ...]:
    """Simple sources on a closed surface leave out what the body itself scatters, at every frequency."""
    heard = max(modes.heard - modes.swing, 0)
    return (Doubt("closed", body.name, heard, heard, float("inf")),) if heard else ()
