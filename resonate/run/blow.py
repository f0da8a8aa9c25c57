"""A strike made ready for the run: where it acts on the modes, with what contact."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from resonate.errors import RunError
from resonate.modes.compliance import residual_compliance
from resonate.run import hertz

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.body import Body, SurfaceSpot
    from resonate.modes.modeset import ModeSet
    from resonate.modes.store import ModeStore
    from resonate.scene.model import StrikeSpec

    Array = NDArray[np.float64]

# Seven points whose mean is exact for polynomials of degree 5 over a disc (Stroud 1971, S2 5-1).
_RING = np.sqrt(2.0 / 3.0)
# Cosine of the steepest direction that still presses on the surface, and of a normal along the body.
_GRAZING, _END_FACE = 1e-6, 0.9
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
    point_m, axis : Array
        (3,) the spot and the unit direction of the push, in the body frame.
    row : Array
        (m + r,) gain on every elastic mode and rigid motion, kg**-0.5.
    give_m_n : float
        Static compliance of the modes left out, m/N.
    mass_kg, speed_m_s, stiffness, loss_s_m : float
        Of the striker and its contact: F = K delta^1.5 (1 + mu delta').
    thickness_m : float
        Of the body under the spot.
    """

    strike: int
    striker: str
    begin_s: float
    point_m: Array
    axis: Array
    row: Array
    give_m_n: float
    mass_kg: float
    speed_m_s: float
    stiffness: float
    loss_s_m: float
    thickness_m: float


def _axis(spec: StrikeSpec, spot: SurfaceSpot, to_body: Array, where: str) -> Array:
    inward = -spot.normal
    if spec.direction is not None:
        axis = to_body @ np.array(spec.direction)
        axis = axis / np.linalg.norm(axis)
        if float(axis @ inward) <= _GRAZING:
            raise RunError(
                what=f"direction {list(spec.direction)} points away from the surface at the spot",
                where=where,
                fix="turn it round, or leave it out to strike along the inward normal",
            )
        return np.asarray(axis)
    if not spec.angle_rad:
        return inward
    # Leaning towards the body's +x, or +z on an end face.
    lean = np.array([1.0, 0.0, 0.0]) if abs(inward[0]) < _END_FACE else np.array([0.0, 0.0, 1.0])
    lean = lean - (lean @ inward) * inward
    lean = lean / np.linalg.norm(lean)
    return np.asarray(np.cos(spec.angle_rad) * inward + np.sin(spec.angle_rad) * lean)


def _patch(spot: SurfaceSpot, radius_m: float) -> Array:
    seed = np.eye(3)[int(np.argmin(np.abs(spot.normal)))]
    first = np.cross(spot.normal, seed)
    first = first / np.linalg.norm(first)
    second = np.cross(spot.normal, first)
    angle = np.arange(6) * np.pi / 3.0
    ring = np.cos(angle)[:, None] * first + np.sin(angle)[:, None] * second
    return np.concatenate((spot.point_m[None], spot.point_m + _RING * radius_m * ring))


def make_blow(
    number: int,
    spec: StrikeSpec,
    body: Body,
    modes: ModeSet,
    *,
    to_body: Array,
    store: ModeStore | None = None,
) -> Blow:
    """Resolve one strike of the scene.

    Parameters
    ----------
    number, spec : int, StrikeSpec
        Which strike.
    body, modes : Body, ModeSet
        What it strikes.
    to_body : Array
        (3, 3) world to body frame at the time of the strike.
    store : ModeStore, optional
        Keeps static compliances.

    Raises
    ------
    BodyError, RunError
        If the spot is off the body or the direction points away from it.
    """
    where = f"strike[{number}] on body {body.name!r}"
    spot, striker = body.spot(spec.spot), spec.striker
    axis = _axis(spec, spot, to_body, where)
    modulus = hertz.reduced_modulus((striker.tip_young_pa, spot.young_pa), (striker.tip_poisson, spot.poisson))
    firm = hertz.stiffness(modulus, striker.tip_radius_m, spot.curvature_1_m)
    if body.family == "line":
        rows = axis @ np.asarray(body.probe(spot.point_m[None]).todense())
    else:
        # Averaged over the pressed patch, so that fine meshes do not make the spot softer.
        depth = hertz.pulse(firm, striker.mass_kg, spec.speed_m_s).depth_m
        points = _patch(spot, float(np.sqrt(striker.tip_radius_m * depth)))
        probes = np.asarray(body.probe(points).todense()).reshape(len(points), 3, -1)
        rows = np.einsum("p,a,pad->d", _WEIGHTS, axis, probes)
    give = float(residual_compliance(body, modes, rows[None], store=store)[0]) if modes.count else 0.0
    return Blow(
        strike=number,
        striker=striker.name,
        begin_s=spec.time_s,
        point_m=spot.point_m,
        axis=axis,
        row=np.concatenate((rows @ modes.shape, rows @ modes.rigid)),
        give_m_n=give,
        mass_kg=striker.mass_kg,
        speed_m_s=spec.speed_m_s,
        stiffness=firm,
        loss_s_m=hertz.loss(striker.restitution, striker.reference_speed_m_s),
        thickness_m=spot.thickness_m,
    )
