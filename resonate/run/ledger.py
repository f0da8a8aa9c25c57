"""Bookkeeping of one body: what every stretch of time gave, took and lost."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from resonate.run.record import Ledger

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.run.subject import State, Subject
    from resonate.run.window import Moving

    Array = NDArray[np.float64]


def split(subject: Subject, lost: Array) -> Ledger:
    """Losses (m,), J, of the modes by cause, in proportion to their decay rates."""
    decay = subject.modes.decay
    share = lost / np.where(decay.total > 0.0, decay.total, 1.0)
    return replace(
        Ledger.empty(),
        lost_material=float(share @ decay.material),
        lost_thermoelastic=float(share @ decay.thermoelastic),
        lost_support=float(share @ decay.support),
        lost_radiation=float(share @ decay.radiation),
    )


def coasting(subject: Subject, before: State, after: State) -> Ledger:
    """Losses of free ringing."""
    return split(subject, subject.modal_energy(before.z) - subject.modal_energy(after.z))


def stretch(subject: Subject, moving: Moving, q: Array, v: Array, *, work: Array, lost: Array) -> Ledger:
    """Losses of a stretch of contact that ends in ``q``, ``v`` (n,).

    ``work`` (n,) of the contacts on everything that moves, ``lost`` (k,) in the contacts. What a mode was given and
    does not hold it has lost; stand-ins lose theirs to what truncation leaves out.
    """
    before = 0.5 * (moving.v**2 + (moving.omega * moving.q) ** 2)
    gone = work - (0.5 * (v**2 + (moving.omega * q) ** 2) - before)
    stands = [float(np.sum(gone[moving.stand(number)])) for number in range(len(lost))]
    return replace(
        split(subject, gone[: subject.elastic]),
        lost_contact=float(np.sum(lost)),
        lost_truncation=float(np.sum(stands)),
    )


def closed(subject: Subject, ledger: Ledger, last: State) -> Ledger:
    """Add what is left at the end, and what does not add up."""
    work = 0.0
    if last.rigid is not None and subject.begin is not None:
        fallen = last.rigid.place_m - subject.begin.place_m
        work = subject.inertia.mass_kg * float(subject.gravity @ fallen)
    filled = replace(
        ledger,
        gravity_work=work,
        modal_left=float(np.sum(subject.modal_energy(last.z))),
        rigid_left=subject.whole_energy(last),
    )
    left = filled.modal_left + filled.rigid_left + filled.contact_left + filled.striker_left
    lost = filled.lost_material + filled.lost_thermoelastic + filled.lost_support + filled.lost_radiation
    lost += filled.lost_contact + filled.lost_truncation
    return replace(filled, residual=filled.given + work - left - lost, scale=filled.given + abs(work))
