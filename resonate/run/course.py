"""The course of one body: free flight and contact, one after the other."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from resonate.run import ledger as books
from resonate.run.passage import passage
from resonate.run.record import Event, Ledger, Segment
from resonate.run.track import crest

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from resonate.run.blow import Blow
    from resonate.run.subject import Subject
    from resonate.run.window import Hit

    Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Course:
    """Everything one body did."""

    segments: tuple[Segment, ...]
    events: tuple[Event, ...]
    ledger: Ledger


def follow(subject: Subject, blows: Sequence[Blow], *, end_s: float) -> Course:
    """Run one body from its begin to ``end_s``, or to the end of its last contact."""
    state = subject.first()
    segments = [Segment(state.time_s, state.z, state.rigid)]
    events: list[Event] = []
    ledger = replace(Ledger.empty(), given=subject.whole_energy(state))
    waiting = sorted(blows, key=lambda blow: (blow.begin_s, blow.strike))
    while waiting:
        at = subject.coast(state, max(waiting[0].begin_s, state.time_s))
        done = passage(subject, at, waiting)
        ledger = ledger.plus(books.coasting(subject, state, at)).plus(done.ledger)
        segments.extend(done.segments)
        state = done.after
        segments.append(Segment(state.time_s, state.z, state.rigid))
        events.extend(event_of(subject.name, hit) for hit in done.hits)
        struck = {hit.blow.strike for hit in done.hits}
        waiting = [blow for blow in waiting if blow.strike not in struck]
    last = subject.coast(state, max(end_s, state.time_s))
    ledger = ledger.plus(books.coasting(subject, state, last))
    ordered = tuple(sorted(events, key=lambda event: (event.begin_s, event.strike)))
    return Course(tuple(segments), ordered, books.closed(subject, ledger, last))


def event_of(body: str, hit: Hit) -> Event:
    """What a table says of one hit: times are roots of the penetration within steps."""
    force = hit.force_n
    steps = np.concatenate([np.full(len(piece.force_n), piece.step_s) for piece in hit.pieces])
    begins = np.concatenate([piece.begin_s + piece.step_s * np.arange(len(piece.force_n)) for piece in hit.pieces])
    before = np.concatenate([piece.depth_m[:-1] for piece in hit.pieces])
    after = np.concatenate([piece.depth_m[1:] for piece in hit.pieces])
    on = np.flatnonzero(force > 0.0)
    first, last = int(on[0]), int(on[-1])
    begin_s, closing = hit.joined_s, hit.closing_m_s
    if before[first] < 0.0:
        # The surface had moved out of its way: it touches later.
        begin_s = float(begins[first] + steps[first] * before[first] / (before[first] - after[first]))
        closing = float((before[first] - before[first - 1]) / steps[first - 1])
    # Where the force ends early the surfaces part a little later.
    out = last + int(np.argmax(after[last:] <= 0.0))
    end_s = float(begins[out] + steps[out] * before[out] / (before[out] - after[out]))
    clear = min(out + 1, len(force) - 1)
    return Event(
        kind="strike",
        body=body,
        other=hit.blow.striker,
        begin_s=begin_s,
        end_s=end_s,
        place_m=hit.place_m,
        impulse_ns=float(force @ steps),
        peak_n=max(crest(piece.force_n, int(np.argmax(piece.force_n))) for piece in hit.pieces),
        closing_speed_m_s=closing,
        leaving_speed_m_s=float((before[clear] - after[clear]) / steps[clear]),
        strike=hit.blow.strike,
    )
