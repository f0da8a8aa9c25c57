"""One body's time, cut into stretches of plain ringing and windows round its contacts."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from resonate.sound.filter import cell_rule
from resonate.sound.ring import powers

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from numpy.typing import NDArray

    from resonate.run.record import Segment

    Array = NDArray[np.float64]
    ComplexArray = NDArray[np.complex128]

# Free time inside a window is integrated in cells of this length; contact time in its own steps.
CELL_S = 1e-4
# Cells in one batch: bounds memory to cells times modes.
BATCH = 512


@dataclass(frozen=True, slots=True)
class Stretch:
    """A span of emission time, s: ringing from segment ``first``, or a window with contacts.

    A window holds the contact segments ``first`` to ``last`` and reaches one kernel half to both sides;
    ``begin_s`` of the first stretch is -inf, ``end_s`` of the last inf.
    """

    begin_s: float
    end_s: float
    first: int
    last: int
    window: bool


def stretches(segments: Sequence[Segment], half_s: float) -> tuple[Stretch, ...]:
    """Cut a body's time where the kernel (half length ``half_s``) starts and stops touching a contact."""
    windows: list[list[float]] = []
    for place, segment in enumerate(segments):
        if not segment.is_contact:
            continue
        end_s = segments[place + 1].begin_s if place + 1 < len(segments) else segment.end_s
        if windows and segment.begin_s - windows[-1][1] <= 2.0 * half_s:
            windows[-1][1], windows[-1][3] = end_s, place
        else:
            windows.append([segment.begin_s, end_s, place, place])
    found: list[Stretch] = []
    last_s, free = -np.inf, 0
    for begin_s, end_s, first, last in windows:
        found.append(Stretch(last_s, begin_s - half_s, free, free, window=False))
        last_s, free = end_s + half_s, int(last) + 1
        found.append(Stretch(begin_s - half_s, last_s, int(first), int(last), window=True))
    found.append(Stretch(last_s, np.inf, free, free, window=False))
    return tuple(found)


@dataclass(frozen=True, slots=True)
class Batch:
    """Cells of equal width, one after the other from ``begin_s``.

    ``drive`` (n, m) is z' just after each cell begins; inside a cell z' is ``drive * exp(lambda u)``, as
    the force is constant there.
    """

    begin_s: float
    width_s: float
    drive: ComplexArray


def only(segments: Sequence[Segment], modes: slice) -> tuple[Segment, ...]:
    """Leave some of the modes in every segment."""
    return tuple(
        replace(segment, z=segment.z[modes], rows=None if segment.rows is None else segment.rows[:, modes])
        for segment in segments
    )


def batches(
    segments: Sequence[Segment],
    stretch: Stretch,
    exponent: ComplexArray,
    *,
    origin_s: float,
    span_s: tuple[float, float],
) -> Iterator[Batch]:
    """Cover part of a window with cells.

    Parameters
    ----------
    segments : Sequence[Segment]
        The body's segments.
    stretch : Stretch
        The window.
    exponent : ComplexArray
        (m,) exponents of the segments' modes.
    origin_s : float
        Times are counted from here (precise late in a take).
    span_s : tuple[float, float]
        What must be covered, counted from ``origin_s``.

    Yields
    ------
    Batch
        In order of time, without gap or overlap.
    """
    begin, end = span_s
    first, last = segments[stretch.first], segments[stretch.last]
    # Ringing before the window: from the segment before it, or backwards from its own start.
    before = segments[stretch.first - 1] if stretch.first > 0 else first
    yield from _free(before, exponent, origin_s, begin, min(end, first.begin_s - origin_s))
    for place in range(stretch.first, stretch.last + 1):
        segment = segments[place]
        until = segments[place + 1].begin_s if place < stretch.last else last.end_s
        if segment.is_contact:
            yield from _contact(segment, exponent, origin_s, begin, end)
        else:
            start = max(begin, segment.begin_s - origin_s)
            yield from _free(segment, exponent, origin_s, start, min(end, until - origin_s))
    after = segments[stretch.last + 1] if stretch.last + 1 < len(segments) else ended(last, exponent)
    yield from _free(after, exponent, origin_s, max(begin, after.begin_s - origin_s), end)


def ended(segment: Segment, exponent: ComplexArray) -> Segment:
    """Free segment that follows a contact segment nothing was recorded after."""
    state = segment.z
    for _, after in _steps(segment, exponent):
        state = after
    return replace(segment, begin_s=segment.end_s, z=state, force_n=None, rows=None, contacts=())


def _free(
    segment: Segment, exponent: ComplexArray, origin_s: float, begin: float, end: float
) -> Iterator[Batch]:
    if not end > begin:
        return
    cells = int(np.ceil((end - begin) / CELL_S))
    width = (end - begin) / cells
    now = exponent * segment.z * np.exp(exponent * (begin - (segment.begin_s - origin_s)))
    for first in range(0, cells, BATCH):
        count = min(BATCH, cells - first)
        drive = now * powers(np.exp(exponent * width), count + 1)
        yield Batch(begin + width * first, width, drive[:count])
        now = drive[count]


def _contact(
    segment: Segment, exponent: ComplexArray, origin_s: float, begin: float, end: float
) -> Iterator[Batch]:
    start, width = segment.begin_s - origin_s, segment.step_s
    drive: list[ComplexArray] = []
    first = 0
    for step, (rate, _) in enumerate(_steps(segment, exponent)):
        time = start + step * width
        if time + width <= begin or time >= end:
            continue
        if not drive:
            first = step
        drive.append(rate)
        if len(drive) == BATCH:
            yield Batch(start + width * first, width, np.array(drive))
            drive = []
    if drive:
        yield Batch(start + width * first, width, np.array(drive))


def _steps(segment: Segment, exponent: ComplexArray) -> Iterator[tuple[ComplexArray, ComplexArray]]:
    # Per step: z' just after it begins, and z at its end (exact for a constant force).
    state = segment.z
    grown = np.expm1(exponent * segment.step_s) / exponent
    if segment.force_n is None or segment.rows is None:
        return
    push = segment.force_n.T @ segment.rows
    for force in push:
        rate = exponent * state + force
        state = state + grown * rate
        yield rate, state


def nodes_of(
    batch: Batch, columns: ComplexArray, exponent: ComplexArray, *, top_hz: float
) -> tuple[Array, Array]:
    """Signal of some channels at the quadrature nodes of a batch.

    Parameters
    ----------
    batch : Batch
        Cells.
    columns : ComplexArray
        (m, c) what each channel takes of z'.
    exponent : ComplexArray
        (m,) exponents.
    top_hz : float
        Highest frequency of kernel times signal, Hz.

    Returns
    -------
    tuple[Array, Array]
        Node times (k,), s, and quadrature weight times signal (k, c).
    """
    inside, weight = cell_rule(batch.width_s, top_hz)
    spread = columns[:, None, :] * np.exp(exponent[:, None] * inside)[:, :, None] * weight[:, None]
    flat = spread.reshape(len(exponent), -1)
    # Real part of a complex product, as one real product.
    values = np.hstack((batch.drive.real, batch.drive.imag)) @ np.vstack((flat.real, -flat.imag))
    times = batch.begin_s + batch.width_s * np.arange(len(batch.drive))[:, None] + inside
    return times.ravel(), values.reshape(times.size, columns.shape[1])
