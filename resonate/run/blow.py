"""A strike made ready for the run: where it acts on the modes, with what contact."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations
from typing import TYPE_CHECKING

import numpy as np
import scipy.sparse

from resonate.modes.compliance import residual_compliance
from resonate.run import hertz

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from resonate.body.body import Body, SurfaceSpot
    from resonate.modes.modeset import ModeSet
    from resonate.modes.store import ModeStore
    from resonate.scene.model import StrikeSpec

    Array = NDArray[np.float64]

# Seven points whose mean is exact for polynomials of degree 5 over a disc (Stroud 1971, S2 5-1).
_RING = np.sqrt(2.0 / 3.0)
_WEIGHTS = np.array([0.25] + 6 * [0.125])


@dataclass(frozen=True, slots=True)
class Blow:
    """One striker against one body.

    Parameters
    ----------
    strike : int
        Number of the strike in the scene.
    striker : str
        Name of the striker.
    begin_s : float
        First touch, scene time.
    point_m, inward : Array
        (3,) the spot and the unit vector into the body there, in the body frame.
    direction : Array or None
        (3,) unit direction of the striker's way in the world; None: along the inward normal at the first touch.
    angle_rad : float
        By how much its way leans away from the inward normal.
    gains : Array
        (3, m + r) motion of the spot along body x, y, z by every elastic mode and rigid motion, kg**-0.5.
    give_m_n : Array
        (3, 3) static compliance of the modes left out, in the body frame, m/N.
    mobility_power : float or None
        How the mobility of those goes on with frequency, where that is known.
    wave_mobility_s_kg : float
        What it is at the least.
    mass_kg, speed_m_s, stiffness, loss_s_m : float
        Of the striker and its contact: F = K delta^1.5 (1 + mu delta').
    thickness_m : float
        Of the body under the spot.
    """

    strike: int
    striker: str
    begin_s: float
    point_m: Array
    inward: Array
    direction: Array | None
    angle_rad: float
    gains: Array
    give_m_n: Array
    mobility_power: float | None
    wave_mobility_s_kg: float
    mass_kg: float
    speed_m_s: float
    stiffness: float
    loss_s_m: float
    thickness_m: float

    def way(self, to_body: Array) -> Array:
        """Unit direction (3,) in which the striker comes, in the body frame; ``to_body`` takes world vectors there.

        With both given, it leans from the inward normal towards ``direction``; with an angle alone towards the
        body's +x, or its +z on an end face.
        """
        toward = None if self.direction is None else to_body @ self.direction
        if toward is not None and not self.angle_rad:
            return np.asarray(toward / np.linalg.norm(toward))
        if not self.angle_rad:
            return self.inward
        lean = self._across(toward)
        return np.asarray(np.cos(self.angle_rad) * self.inward + np.sin(self.angle_rad) * lean)

    def _across(self, toward: Array | None) -> Array:
        end_face = abs(self.inward[0]) >= 0.9  # noqa: PLR2004 (most of the normal lies along x)
        for lean in (toward, np.array([0.0, 0.0, 1.0]) if end_face else np.array([1.0, 0.0, 0.0])):
            if lean is None:
                continue
            flat = lean - (lean @ self.inward) * self.inward
            size = float(np.linalg.norm(flat))
            if size > 1e-6:  # noqa: PLR2004 (along the normal there is no side to lean to)
                return np.asarray(flat / size)
        raise AssertionError  # one of the body's axes always crosses the normal


def _patch(spot: SurfaceSpot, radius_m: float) -> Array:
    seed = np.eye(3)[int(np.argmin(np.abs(spot.normal)))]
    first = np.cross(spot.normal, seed)
    first = first / np.linalg.norm(first)
    second = np.cross(spot.normal, first)
    angle = np.arange(6) * np.pi / 3.0
    ring = np.cos(angle)[:, None] * first + np.sin(angle)[:, None] * second
    return np.concatenate((spot.point_m[None], spot.point_m + _RING * radius_m * ring))


def _stepped(radius_m: float) -> float:
    """Nearest of a ladder of radii, so that strikes of slightly different speed share what is kept of a spot.

    Two rungs an octave: the mean over a plate depends on the logarithm of the radius alone.
    """
    return float(2.0 ** (0.5 * np.round(2.0 * np.log2(radius_m))))


def _closing(spec: StrikeSpec) -> float:
    return spec.speed_m_s * float(np.cos(spec.angle_rad))


def _touched(body: Body, spots: Sequence[SurfaceSpot], radii_m: Sequence[float]) -> list[Array]:
    """Motion (3, d) of every spot by every freedom."""
    if body.family in ("line", "lump"):
        points, weights = [spot.point_m[None] for spot in spots], np.ones(1)
    else:
        # Averaged over the pressed patch, so that fine meshes do not make the spot softer.
        points, weights = [_patch(spot, size) for spot, size in zip(spots, radii_m, strict=True)], _WEIGHTS
    rows = body.probe(np.concatenate(points))
    share = scipy.sparse.kron(weights[None, :], scipy.sparse.eye_array(3))
    mean = scipy.sparse.kron(scipy.sparse.eye_array(len(spots)), share) @ rows
    return list(np.asarray(mean.todense()).reshape(len(spots), 3, -1))


def _gives(body: Body, modes: ModeSet, rows: Sequence[Array], store: ModeStore | None) -> list[Array]:
    """Compliances (3, 3) of the missing modes: of three directions, and of their three sums in pairs."""
    if not modes.count:
        return [np.zeros((3, 3)) for _ in rows]
    pairs = list(combinations(range(3), 2))
    # Strikes on the same spot ask once.
    spots = {three.tobytes(): three for three in rows}
    asked = [np.concatenate((three, [three[a] + three[b] for a, b in pairs])) for three in spots.values()]
    answers = residual_compliance(body, modes, np.concatenate(asked), store=store).reshape(len(spots), 6)
    by_spot = dict(zip(spots, answers, strict=True))
    found = []
    for answer in (by_spot[three.tobytes()] for three in rows):
        give = np.diag(answer[:3])
        for (a, b), both in zip(pairs, answer[3:], strict=True):
            give[a, b] = give[b, a] = 0.5 * (both - answer[a] - answer[b])
        found.append(give)
    return found


def _without_half_space(give: Array, spot: SurfaceSpot, radius_m: float) -> Array:
    """Take away what the contact law holds already: the give of a half-space under an evenly pressed disc.

    The mean displacement under a force P spread evenly over a disc of radius a is 16 (1 - nu^2) P/(3 pi^2 E a)
    (Timoshenko & Goodier, Theory of Elasticity, section 139: 0.54 (1 - nu^2) P/(E a)).
    """
    if spot.spread_m <= 0.0:
        return give
    own = 16.0 * (1.0 - spot.poisson**2) / (3.0 * np.pi**2 * spot.young_pa * radius_m)
    return give - min(own, float(spot.normal @ give @ spot.normal)) * np.outer(spot.normal, spot.normal)


def make_blows(
    strikes: Sequence[tuple[int, StrikeSpec]], body: Body, modes: ModeSet, *, store: ModeStore | None = None
) -> list[Blow]:
    """Resolve all strikes (number, what was asked) on one body.

    Parameters
    ----------
    strikes : sequence of (int, StrikeSpec)
        Number in the scene, and the strike.
    body, modes : Body, ModeSet
        What they strike.
    store : ModeStore, optional
        Keeps static compliances.

    Raises
    ------
    BodyError, RunError
        If a spot is off the body or a tip does not fit it.
    """
    spots = [body.spot(spec.spot) for _, spec in strikes]
    locals_ = [
        hertz.local(
            hertz.reduced_modulus((spec.striker.tip_young_pa, spot.young_pa), (spec.striker.tip_poisson, spot.poisson)),
            spec.striker.tip_radius_m,
            spot.curvature_1_m,
            where=f"strike[{number}] on body {body.name!r}",
        )
        for (number, spec), spot in zip(strikes, spots, strict=True)
    ]
    if not strikes:
        return []
    pressed = [
        local.patch_m(hertz.pulse(local.stiffness, spec.striker.mass_kg, _closing(spec)).depth_m)
        for (_, spec), local in zip(strikes, locals_, strict=True)
    ]
    rows = _touched(body, spots, [_stepped(size) for size in pressed])
    # The give of all that no mode holds is known only as finely as the mesh is.
    radii = [_stepped(max(size, spot.spread_m)) for size, spot in zip(pressed, spots, strict=True)]
    wide = _touched(body, spots, radii) if any(spot.spread_m for spot in spots) else rows
    found = _gives(body, modes, wide, store)
    gives = [_without_half_space(*each) for each in zip(found, spots, radii, strict=True)]
    return [
        Blow(
            strike=number,
            striker=spec.striker.name,
            begin_s=spec.time_s,
            point_m=spot.point_m,
            inward=-spot.normal,
            direction=None if spec.direction is None else np.array(spec.direction),
            angle_rad=spec.angle_rad,
            gains=np.hstack((three @ modes.shape, three @ modes.rigid)),
            give_m_n=give,
            mobility_power=spot.mobility_power,
            wave_mobility_s_kg=spot.wave_mobility_s_kg,
            mass_kg=spec.striker.mass_kg,
            speed_m_s=spec.speed_m_s,
            stiffness=local.stiffness,
            loss_s_m=hertz.loss(spec.striker.restitution, spec.striker.reference_speed_m_s),
            thickness_m=spot.thickness_m,
        )
        for (number, spec), spot, local, three, give in zip(strikes, spots, locals_, rows, gives, strict=True)
    ]
