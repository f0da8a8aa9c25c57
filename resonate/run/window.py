"""A stretch of contact: strikers, modes and rigid motion stepped together until they part for good."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from resonate.errors import RunError
from resonate.run import hertz
from resonate.run.kernels.march import march_many, march_one
from resonate.run.propagator import coefficients

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.run.blow import Blow

    Array = NDArray[np.float64]

# The base of every contact rate, Hz; steps are 1/(BASE 2^k), whatever the delivery rate.
BASE_HZ = 48_000
LEAST_POWER, MOST_POWER = 2, 9
# Steps over a Hertz contact when the rate is chosen, and the fewest that are accepted afterwards.
WANTED, LEAST = 32, 28
# Without force for this long (and this many steps) a contact may be over.
_QUIET_S, _QUIET_STEPS = 50e-6, 20
# A contact that lasts longer than this is no strike.
_LONGEST_S = 0.5
# Missing modes are carried by one heavily damped mode at this multiple of the highest solved one.
_STAND_IN, _STAND_IN_ZETA = 2.0, 0.7
_CHUNK_S = 2e-3


@dataclass
class Motion:
    """Modes of one body while they are stepped: elastic, rigid, and stand-ins for missing ones.

    ``omega``, ``decay``, ``q``, ``v``, ``work`` (n,). Stand-ins are the last ones, one for each live striker.
    """

    omega: Array
    decay: Array
    q: Array
    v: Array
    work: Array

    def grown(self, omega: float, decay: float) -> Motion:
        """With one more mode, at rest."""
        zero = np.zeros(1)
        return Motion(
            np.append(self.omega, omega),
            np.append(self.decay, decay),
            *(np.append(part, zero) for part in (self.q, self.v, self.work)),
        )

    def copy(self) -> Motion:
        """An independent copy."""
        return Motion(self.omega, self.decay, self.q.copy(), self.v.copy(), self.work.copy())


@dataclass
class Hit:
    """One striker during its contact."""

    blow: Blow
    row: Array
    penetration_m: float
    speed_m_s: float
    lost: float
    closing_m_s: float
    forces: list[tuple[float, float, Array]] = field(default_factory=list)
    depths: list[Array] = field(default_factory=list)


@dataclass(frozen=True, slots=True)
class Stretch:
    """Steps of one length: ``begin_s``, ``step_s``, ``force_n`` (c, n) for the strikes ``numbers``."""

    begin_s: float
    step_s: float
    force_n: Array
    numbers: tuple[int, ...]


def first_power(blow: Blow, closing_m_s: float) -> int:
    """Rate (as a power of two over the base) that the Hertz time of a blow asks for."""
    pulse = hertz.pulse(blow.stiffness, blow.mass_kg, max(closing_m_s, 1e-6))
    rate = max(4.0 * BASE_HZ, WANTED / pulse.duration_s)
    return int(np.clip(np.ceil(np.log2(rate / BASE_HZ) - 1e-9), LEAST_POWER, MOST_POWER))


def quiet_steps(step_s: float) -> int:
    """Steps without force after which a contact may be over."""
    return max(_QUIET_STEPS, int(np.ceil(_QUIET_S / step_s)))


def stand_in(blow: Blow, top_omega: float) -> tuple[float, float, float]:
    """Frequency, decay and gain of the mode that carries the missing compliance of a blow."""
    omega = _STAND_IN * top_omega
    return omega, _STAND_IN_ZETA * omega, omega * float(np.sqrt(blow.give_m_n))


def advance(
    motion: Motion,
    hits: list[Hit],
    *,
    begin_s: float,
    step_s: float,
    steps: int,
    quiet: int,
    drift: Array,
) -> Stretch:
    """March at most ``steps`` steps in place; stops early after ``quiet`` steps without force.

    ``drift`` (c, steps): motion of the struck points that no contact force causes.
    """
    table = coefficients(motion.omega, motion.decay, step_s).stacked()
    rows = np.ascontiguousarray(np.stack([hit.row for hit in hits]))
    contact = np.array([[hit.blow.stiffness, hit.blow.loss_s_m] for hit in hits])
    striker = np.array([[hit.penetration_m, hit.speed_m_s, hit.blow.mass_kg, hit.lost, 0.0] for hit in hits])
    force, depth = np.zeros((len(hits), steps)), np.zeros((len(hits), steps))
    if len(hits) == 1:
        done = march_one(
            motion.q, motion.v, table, rows[0], drift[0], contact[0], striker[0], motion.work, force[0], depth[0],
            0, quiet, step_s,
        )  # fmt: skip
    else:
        done = march_many(
            motion.q, motion.v, table, rows, drift, contact, striker, motion.work, force, depth, 0, quiet, step_s
        )
    for number, hit in enumerate(hits):
        hit.penetration_m, hit.speed_m_s, hit.lost = (float(striker[number, k]) for k in (0, 1, 3))
        hit.forces.append((begin_s, step_s, force[number, :done]))
        hit.depths.append(depth[number, :done])
    numbers = tuple(hit.blow.strike for hit in hits)
    return Stretch(begin_s, step_s, force[:, :done].copy(), numbers)


def parted(motion: Motion, hit: Hit, *, elastic: int, lost_speed_m_s: float) -> bool:
    """Whether a striker can never touch again: out of reach of the ringing, and moving away.

    ``elastic`` is the number of modes with stiffness; ``lost_speed_m_s`` of the struck point by its free fall.
    """
    row = hit.row
    stiff = motion.omega > 0.0
    swing = np.sqrt(np.maximum(motion.omega**2 - motion.decay**2, 1e-300))
    size = np.hypot(motion.q, (motion.v + motion.decay * motion.q) / swing)
    ringing = np.zeros(len(row), dtype=bool)
    ringing[:elastic] = True
    ringing &= stiff
    reach = float(np.abs(row[ringing]) @ size[ringing])
    shifted = float(row[ringing] @ motion.q[ringing])
    # Where the striker stands against the resting surface: penetration plus the present deflection.
    stands = hit.penetration_m + shifted
    away = float(row[~stiff] @ motion.v[~stiff]) + lost_speed_m_s - hit.speed_m_s
    return stands < -reach and away > 0.0


def too_long(begin_s: float, now_s: float, hit: Hit, body: str) -> None:
    """Refuse a contact that does not end.

    Raises
    ------
    RunError
        After half a second.
    """
    if now_s - begin_s < _LONGEST_S:
        return
    touched = any(np.any(force > 0.0) for _, _, force in hit.forces)
    where = f"strike[{hit.blow.strike}] on body {body!r}"
    if not touched:
        raise RunError(
            what=f"the striker does not reach the body, which moves away faster than {hit.blow.speed_m_s:g} m/s",
            where=where,
            fix="strike faster, earlier, or from the other side",
        )
    raise RunError(
        what=f"the striker still touches after {_LONGEST_S:g} s",
        where=where,
        fix="use a lighter or harder striker, or a higher speed: a strike must leave the body",
    )


def chunk(step_s: float) -> int:
    """Steps marched before the state is looked at."""
    return max(256, int(_CHUNK_S / step_s))


def shortest_run(hit: Hit) -> int:
    """Steps of the first touch; a large number when it never touched."""
    force = np.concatenate([part for _, _, part in hit.forces]) if hit.forces else np.zeros(0)
    on = np.flatnonzero(force > 0.0)
    if not len(on):
        return 10**9
    off = np.flatnonzero(force[on[0] :] == 0.0)
    return int(off[0]) if len(off) else len(force) - int(on[0])
