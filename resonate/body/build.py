"""From a body of the scene to matter that can be solved, struck, heard and seen."""

from __future__ import annotations

import hashlib
import json
from typing import TYPE_CHECKING

import numpy as np

from resonate.body.coil import CoilBody
from resonate.body.coil_layout import lay_coil
from resonate.body.flat import FlatBody
from resonate.body.flat_layout import lay_flat
from resonate.body.formula import FormulaBody
from resonate.body.line import LineBody
from resonate.body.line_layout import lay_line
from resonate.body.lumps import LumpsBody
from resonate.body.solid import SolidBody
from resonate.body.solid_layout import lay_solid
from resonate.body.solid_mesh import lay_mesh
from resonate.body.vessel import VesselBody
from resonate.body.vessel_layout import ORDER, lay_vessel
from resonate.scene.model import (
    BallShape,
    BlockShape,
    CoilShape,
    CylinderShape,
    FormulaShape,
    LumpsShape,
    MembraneShape,
    PlateShape,
    SolidShape,
    VesselShape,
)

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.body import Body
    from resonate.scene.model import BodySpec

    Array = NDArray[np.float64]

# Raise when elements, energies or damping forms change, so that stored modes are made anew.
VERSION = 8


def _up(spec: BodySpec) -> Array:
    x, y, z, w = spec.turn
    turn = np.array(
        [
            [1 - 2 * (y * y + z * z), 2 * (x * y - z * w), 2 * (x * z + y * w)],
            [2 * (x * y + z * w), 1 - 2 * (x * x + z * z), 2 * (y * z - x * w)],
            [2 * (x * z - y * w), 2 * (y * z + x * w), 1 - 2 * (x * x + y * y)],
        ]
    )
    return np.asarray(turn[1])


def _key(spec: BodySpec, *, temperature_k: float, gravity_m_s2: float, mesh: tuple[int, ...]) -> str:
    hung = any("length_m" in hold.hold.model_dump() for hold in spec.support)
    facts = {
        "version": VERSION,
        "shape": spec.shape.model_dump(mode="json"),
        "material": spec.material.model_dump(mode="json", exclude={"name", "source"}),
        "support": [hold.model_dump(mode="json") for hold in spec.support],
        "held": spec.held,
        "temperature_k": temperature_k,
        "cords": [*_up(spec).tolist(), 0.0 if spec.floating else gravity_m_s2] if hung else [],
        "mesh": mesh,
    }
    return hashlib.sha256(json.dumps(facts, sort_keys=True).encode()).hexdigest()


def _lump_key(spec: BodySpec, gravity_m_s2: float) -> str:
    # Weight decides where points rest, however they are held.
    pull = 0.0 if spec.floating else gravity_m_s2
    facts = [_key(spec, temperature_k=0.0, gravity_m_s2=0.0, mesh=()), pull, *_up(spec).tolist()]
    return hashlib.sha256(json.dumps(facts).encode()).hexdigest()


def build_body(spec: BodySpec, *, temperature_k: float = 293.15, gravity_m_s2: float = 9.80665) -> Body:
    """Lay the mesh of a body and make its energies ready.

    Parameters
    ----------
    spec : BodySpec
        Shape, material, support and bands.
    temperature_k : float
        Of the surroundings, K; thermoelastic loss depends on it.
    gravity_m_s2 : float
        Weight pulls on cords, m/s^2.

    Raises
    ------
    BodyError
        If the shape cannot be meshed or a support holds nothing of it.
    """
    if isinstance(spec.shape, BlockShape | BallShape | CylinderShape | SolidShape):
        solid = lay_mesh(spec) if isinstance(spec.shape, SolidShape) else lay_solid(spec)
        key = _key(spec, temperature_k=temperature_k, gravity_m_s2=gravity_m_s2, mesh=solid.mesh)
        return SolidBody(spec, solid, key, temperature_k, gravity_m_s2, _up(spec))
    if isinstance(spec.shape, VesselShape):
        wall = lay_vessel(spec)
        shells = (ORDER, wall.elements, wall.freedoms, wall.harmonics)
        key = _key(spec, temperature_k=temperature_k, gravity_m_s2=gravity_m_s2, mesh=shells)
        return VesselBody(spec, wall, key, temperature_k, gravity_m_s2, _up(spec))
    if isinstance(spec.shape, FormulaShape):
        return FormulaBody(spec, _key(spec, temperature_k=0.0, gravity_m_s2=0.0, mesh=()))
    if isinstance(spec.shape, LumpsShape):
        return LumpsBody(spec, _lump_key(spec, gravity_m_s2), gravity_m_s2, _up(spec))
    if isinstance(spec.shape, CoilShape):
        coil = lay_coil(spec)
        mesh = (coil.grid.order, len(coil.grid.elements), len(coil.grid.nodes_m))
        key = _key(spec, temperature_k=temperature_k, gravity_m_s2=gravity_m_s2, mesh=mesh)
        return CoilBody(spec, coil, key, temperature_k, gravity_m_s2, _up(spec))
    flat = isinstance(spec.shape, PlateShape | MembraneShape)
    layout = lay_flat(spec) if flat else lay_line(spec)
    mesh = (layout.grid.order, len(layout.grid.elements), len(layout.grid.nodes_m))
    key = _key(spec, temperature_k=temperature_k, gravity_m_s2=gravity_m_s2, mesh=mesh)
    kind = FlatBody if flat else LineBody
    return kind(spec, layout, key, temperature_k, gravity_m_s2, _up(spec))  # type: ignore[arg-type]
