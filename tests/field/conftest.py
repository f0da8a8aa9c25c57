"""Radiating samples made by hand: discs, rectangles and lines that move as a formula says."""

from __future__ import annotations

from types import SimpleNamespace

import numpy as np
import pytest
from scipy.sparse import eye_array

from resonate.body.body import Radiator, Surface
from resonate.field.air import Air
from resonate.field.transfer import transfer_for
from resonate.modes.modeset import Decay, ModeSet

AIR = Air(speed_m_s=343.2, density_kg_m3=1.204)


def modes_at(wavenumber_1_m, shape, *, heard=None, swing=0):
    omega = np.atleast_1d(np.asarray(wavenumber_1_m, dtype=float)) * AIR.speed_m_s
    none = np.zeros_like(omega)
    return ModeSet(
        body="hatch",
        key="0",
        omega=omega,
        shape=shape,
        rigid=np.zeros((len(shape), 0)),
        decay=Decay(material=none, thermoelastic=none, support=none, radiation=none),
        residual=none,
        heard=len(omega) if heard is None else heard,
        swing=swing,
        heard_hz=20e3,
        solved_hz=80e3,
    )


def body_of(kind, points, normals, weights, *, surface=None):
    points = np.asarray(points, dtype=float)
    surface = points if surface is None else np.asarray(surface, dtype=float)
    none = np.zeros((0, 3), dtype=np.int64)
    return SimpleNamespace(
        name="hatch",
        radiator=Radiator(kind, points, np.asarray(normals, dtype=float), np.asarray(weights, dtype=float)),
        surface=Surface(surface, np.zeros_like(surface), none),
        probe=lambda asked: eye_array(3 * len(asked), format="csr"),
    )


def disc(radius_m, rings):
    """Points (n, 3) and areas (n,) of a disc round the origin in the x-z plane: midpoints of equal rings."""
    points, areas = [], []
    step = radius_m / rings
    for ring in range(rings):
        middle = (ring + 0.5) * step
        count = max(6, round(2.0 * np.pi * middle / step))
        turn = 2.0 * np.pi * (np.arange(count) + 0.5 * (ring % 2)) / count
        points.append(np.stack((middle * np.cos(turn), np.zeros(count), middle * np.sin(turn)), axis=1))
        areas.append(np.full(count, 2.0 * np.pi * middle * step / count))
    return np.concatenate(points), np.concatenate(areas)


def face(points, areas, motion, wavenumber_1_m, **how):
    """Baffled transfer of a face in the x-z plane that moves along y by ``motion`` (n,) or (n, m)."""
    motion = np.asarray(motion, dtype=float).reshape(len(points), -1)
    shape = np.zeros((3 * len(points), motion.shape[1]))
    shape[1::3] = motion
    normals = np.tile([0.0, 1.0, 0.0], (len(points), 1))
    weights = np.zeros((len(points), 3))
    weights[:, 0] = areas
    heard, swing = how.pop("heard", None), how.pop("swing", 0)
    return transfer_for(
        body_of("baffled", points, normals, weights, **how),
        modes_at(wavenumber_1_m, shape, heard=heard, swing=swing),
        AIR,
    )


def line(points, volumes, motion, wavenumber_1_m, **how):
    """Dipole transfer of a line whose samples move by ``motion`` (n, 3)."""
    shape = np.asarray(motion, dtype=float).reshape(-1, 1)
    normals = np.zeros_like(points)
    return transfer_for(
        body_of("dipoles", points, normals, volumes, **how), modes_at(wavenumber_1_m, shape), AIR
    )


@pytest.fixture
def air_model():
    """The builders of this file, for tests that cannot import it."""
    return SimpleNamespace(
        air=AIR, disc=disc, face=face, line=line, body_of=body_of, modes_at=modes_at, transfer_for=transfer_for
    )
