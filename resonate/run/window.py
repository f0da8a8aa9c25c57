"""A stretch of contact of one body: strikers, modes and motion as a whole stepped together."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

import numpy as np

from resonate.errors import RunError
from resonate.run import hertz
from resonate.run.kernels.march import LANES, march
from resonate.run.ladder import NONE, RUNGS
from resonate.run.propagator import coefficients

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.run.blow import Blow
    from resonate.run.ladder import Ladder
    from resonate.run.subject import Loaded

    Array = NDArray[np.float64]

# The base of every contact rate, Hz; steps are 1/(BASE 2^k), whatever the delivery rate.
BASE_HZ = 48_000
LEAST_POWER, MOST_POWER = 2, 9
# Rate beyond which light modes alone do not push: there the ringing differs by less than -50 dB from its limit.
_MODAL_POWER = 5
# Steps over a Hertz contact when the rate is chosen, and the fewest that are accepted afterwards.
WANTED, LEAST = 32, 28
# Touches that carry less than this share of a blow's impulse need no resolution.
_SLIGHT = 0.01
# Without force for this long (and this many steps) a striker may be gone, if nothing reaches it for SAFE_S.
_QUIET_S, _QUIET_STEPS, _SAFE_S = 50e-6, 20, 0.5e-3
# A contact that lasts longer than this is no strike.
LONGEST_S = 0.5
# Time marched before the state is looked at, and least number of steps.
_CHUNK_S, _CHUNK_STEPS = 1e-4, 32


# What a contact brings along: its stand-ins and its striker.
_EACH = RUNGS + 1


def _still() -> Array:
    return np.zeros(RUNGS)


@dataclass(frozen=True, slots=True)
class Piece:
    """Steps of one length: ``force_n`` (n,) in them and ``depth_m`` (n + 1,) between them."""

    begin_s: float
    step_s: float
    force_n: Array
    depth_m: Array


@dataclass(frozen=True, slots=True)
class Hit:
    """One striker while it is about.

    ``axis`` (3,) of its push: in the world for a free body, in the frame of a supported one. ``joined_s``,
    ``closing_m_s``: first touch; ``place_m`` (3,) of it in the world. ``speed_m_s`` along the axis,
    ``aside_m_s`` across it, and ``penetration_m`` now; ``stand_q``, ``stand_v`` (r,) of its stand-ins on the
    ``ladder``. ``power``: the rate it asks for.
    """

    blow: Blow
    axis: Array
    power: int
    joined_s: float
    closing_m_s: float
    place_m: Array
    speed_m_s: float
    aside_m_s: float = 0.0
    ladder: Ladder = NONE
    penetration_m: float = 0.0
    stand_q: Array = field(default_factory=_still)
    stand_v: Array = field(default_factory=_still)
    pieces: tuple[Piece, ...] = ()

    @property
    def energy_j(self) -> float:
        """Kinetic energy of the striker now."""
        return 0.5 * self.blow.mass_kg * (self.speed_m_s**2 + self.aside_m_s**2)

    @property
    def force_n(self) -> Array:
        """(n,) force in every step so far."""
        return np.concatenate([piece.force_n for piece in self.pieces]) if self.pieces else np.zeros(0)


@dataclass(frozen=True, slots=True)
class Moving:
    """All that moves in a stretch of constant contacts, each of unit modal mass, (n,) padded with zeros.

    First the body's ``body`` modes and motions, then the stand-ins and the striker of each contact. ``rows`` (k, n):
    contact j closes by ``-rows[j] @ q``; ``elastic`` marks the body's modes with stiffness.
    """

    omega: Array
    decay: Array
    load: Array
    rows: Array
    q: Array
    v: Array
    body: int
    elastic: NDArray[np.bool_]

    def stand(self, number: int) -> slice:
        """Places of the stand-ins of contact ``number``; its striker comes next."""
        at = self.body + _EACH * number
        return slice(at, at + RUNGS)

    def stands(self, q: Array, v: Array) -> Array:
        """Energy (k,) that the stand-ins hold in a state, J."""
        held = 0.5 * (v**2 + (self.omega * q) ** 2)
        return np.array([float(np.sum(held[self.stand(number)])) for number in range(len(self.rows))])


def gather(body: Loaded, *, rows: Array, hits: tuple[Hit, ...]) -> Moving:
    """Put a body (b,) and its strikers side by side; ``rows`` (k, b) gains."""
    size, count = len(body.omega), len(hits)
    total = -(-(size + _EACH * count) // LANES) * LANES
    padded = [np.zeros(total) for _ in range(5)]
    for whole, part in zip(padded, (body.omega, body.decay, body.load, body.q, body.v), strict=True):
        whole[:size] = part
    wide = np.zeros((count, total))
    wide[:, :size] = rows
    stiff = np.zeros(total, dtype=bool)
    stiff[:size] = body.omega > 0.0
    moving = Moving(padded[0], padded[1], padded[2], wide, padded[3], padded[4], size, stiff)
    for number, hit in enumerate(hits):
        at, stands = moving.stand(number), hit.ladder
        moving.omega[at], moving.decay[at] = stands.omega, stands.decay
        wide[number, at] = stands.gain
        moving.q[at], moving.v[at] = hit.stand_q, hit.stand_v
        root = np.sqrt(hit.blow.mass_kg)
        wide[number, at.stop] = -1.0 / root
        moving.v[at.stop] = hit.speed_m_s * root
    return moving


class Stepper:
    """Marches one stretch, chunk after chunk.

    ``forces``, ``depths``: parts (k, n) of the forces in the steps and of the depths between them (k, n + 1 in all);
    ``work`` (all,) and ``lost`` (k,) of the contacts; ``q``, ``v`` the state after ``done`` steps, ``last_q``,
    ``last_v`` after ``last``, the last step with a force.
    """

    def __init__(self, moving: Moving, hits: tuple[Hit, ...], step_s: float, where: str) -> None:
        self.moving, self.hits, self.step_s, self.where = moving, hits, step_s, where
        self.table = coefficients(moving.omega, moving.decay, step_s).stacked()
        self.contact = np.array([[hit.blow.stiffness for hit in hits], [hit.blow.loss_s_m / step_s for hit in hits]])
        self.delta = np.array([hit.penetration_m for hit in hits])
        self.q, self.v = moving.q.copy(), moving.v.copy()
        self.work, self.lost = np.zeros_like(self.q), np.zeros(len(hits))
        self.forces: list[Array] = []
        self.depths: list[Array] = [self.delta[:, None].copy()]
        self.done, self.last = 0, 0
        self.last_q, self.last_v = self.q.copy(), self.v.copy()

    def march(self, steps: int) -> None:
        """Take some more steps."""
        count = len(self.hits)
        force, depth = np.zeros((count, steps)), np.zeros((count, steps + 1))
        last_q, last_v = np.zeros_like(self.q), np.zeros_like(self.v)
        last, done = march(
            self.q, self.v, self.table, self.moving.load, self.moving.rows, self.contact, self.delta,
            force, depth, self.work, self.lost, last_q, last_v,
        )  # fmt: skip
        if done < steps:
            raise RunError(
                what=f"the contact force of a step of {self.step_s:g} s was not found",
                where=self.where,
                fix="this is a defect of the run; report it with the scene",
            )
        if last:
            self.last, self.last_q, self.last_v = self.done + last, last_q, last_v
        self.done += steps
        self.forces.append(force)
        self.depths.append(depth[:, 1:])

    def advanced(self, begin_s: float) -> tuple[Hit, ...]:
        """The hits at the end of the stretch, which began at ``begin_s``."""
        force, depth = np.concatenate(self.forces, axis=1), np.concatenate(self.depths, axis=1)
        found = []
        for number, hit in enumerate(self.hits):
            stand = self.moving.stand(number)
            piece = Piece(begin_s, self.step_s, force[number], depth[number])
            found.append(
                replace(
                    hit,
                    speed_m_s=float(self.v[stand.stop]) / float(np.sqrt(hit.blow.mass_kg)),
                    penetration_m=float(self.delta[number]),
                    stand_q=self.q[stand].copy(),
                    stand_v=self.v[stand].copy(),
                    pieces=(*hit.pieces, piece),
                )
            )
        return tuple(found)

    def stored_j(self) -> float:
        """Energy that the contacts hold now, J: where the force has ended early, not all has been given back."""
        return float(np.sum(0.4 * self.contact[0] * np.maximum(self.delta, 0.0) ** 2.5))

    def quiet_s(self, number: int) -> float:
        """How long contact ``number`` has been without force, s; its earlier pieces count too."""
        parts = [*(piece.force_n for piece in self.hits[number].pieces), *(force[number] for force in self.forces)]
        steps = [*(piece.step_s for piece in self.hits[number].pieces), *(self.step_s for _ in self.forces)]
        quiet = 0.0
        for force, step in zip(reversed(parts), reversed(steps), strict=True):
            on = np.flatnonzero(force > 0.0)
            quiet += step * (len(force) - (int(on[-1]) + 1 if len(on) else 0))
            if len(on):
                break
        return quiet

    def gone(self, number: int) -> bool:
        """Whether a striker has left: out of reach of the ringing for a while to come, and not coming back."""
        if self.quiet_s(number) < max(_QUIET_S, _QUIET_STEPS * self.step_s):
            return False
        row, stiff, stand = self.moving.rows[number], self.moving.elastic, self.moving.stand(number)
        omega, decay = self.moving.omega[stiff], self.moving.decay[stiff]
        q, v = self.q[stiff], self.v[stiff]
        # |q| <= |z| / wd from now on.
        reach = float(np.abs(row[stiff]) @ np.hypot(q, (v + decay * q) / np.sqrt((omega - decay) * (omega + decay))))
        gap = -float(self.delta[number]) - float(row[stiff] @ q) - float(row[stand] @ self.q[stand])
        whole = self.moving.omega == 0.0
        opening, pull = float(row[whole] @ self.v[whole]), float(row @ self.moving.load)
        looks = [0.0, _SAFE_S]
        if pull > 0.0 and 0.0 < -opening < pull * _SAFE_S:
            looks.append(-opening / pull)
        nearest = min(gap + opening * time + 0.5 * pull * time**2 for time in looks)
        return nearest > reach and opening + pull * _SAFE_S >= 0.0


def first_power(hit: Hit, omega: Array, row: Array) -> int:
    """Rate (as a power of two over the base) that the Hertz time of a hit asks for.

    ``row`` (b,) gains on the body's modes of ``omega`` (b,). Motions as a whole make a striker's mass feel lighter; so
    do modes slower than the contact, but what is as light as a string soon stops to matter: they only count so far.
    """
    speed = max(abs(hit.closing_m_s), 1e-3 * hit.blow.speed_m_s)
    own = 1.0 / hit.blow.mass_kg
    whole = _power(hit, own + float(np.sum(row[omega == 0.0] ** 2)), speed)
    light = own
    for _ in range(6):
        time = hertz.pulse(hit.blow.stiffness, 1.0 / light, speed).duration_s
        light = own + float(np.sum(row**2 / (1.0 + (omega * time / np.pi) ** 2)))
    return max(whole, min(_power(hit, light, speed), _MODAL_POWER))


def _power(hit: Hit, lightness_1_kg: float, speed_m_s: float) -> int:
    time = hertz.pulse(hit.blow.stiffness, 1.0 / lightness_1_kg, speed_m_s).duration_s
    rate = max(4.0 * BASE_HZ, WANTED / time)
    return int(np.clip(np.ceil(np.log2(rate / BASE_HZ) - 1e-9), LEAST_POWER, MOST_POWER))


def finer(hit: Hit) -> int:
    """Power of the rate at which the shortest touch that counts has enough steps; the present one if it has."""
    force = hit.force_n
    step = np.concatenate([np.full(len(piece.force_n), piece.step_s) for piece in hit.pieces])
    on = np.concatenate(([False], force > 0.0, [False]))
    begins, ends = np.flatnonzero(on[1:] & ~on[:-1]), np.flatnonzero(on[:-1] & ~on[1:])
    impulse = np.concatenate(([0.0], np.cumsum(force * step)))
    counts = (impulse[ends] - impulse[begins]) > _SLIGHT * impulse[-1]
    if not np.any(counts):
        return hit.power
    # A step cut short by the next strike counts as its share.
    full = 1.0 / (BASE_HZ * 2.0**hit.power)
    passed = np.concatenate(([0.0], np.cumsum(step / full)))
    least = float(np.min((passed[ends] - passed[begins])[counts]))
    if least >= LEAST - 1e-6:
        return hit.power
    return min(MOST_POWER, hit.power + max(1, int(np.ceil(np.log2(LEAST / least)))))


def chunk(step_s: float) -> int:
    """Steps marched before the state is looked at."""
    return max(_CHUNK_STEPS, int(np.ceil(_CHUNK_S / step_s)))
