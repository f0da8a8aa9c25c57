"""The curve of a coil: places, frames and nearest points along the arc."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

_NEWTON = 12


@dataclass(frozen=True, slots=True)
class Helix:
    """``radius_m``, ``rise_m`` along x for one radian, and the ``angle`` (rad) that the whole curve turns."""

    radius_m: float
    rise_m: float
    angle: float

    @property
    def stretch_m(self) -> float:
        """Arc length of one radian."""
        return float(np.hypot(self.radius_m, self.rise_m))

    @property
    def length_m(self) -> float:
        """Arc length of the whole curve."""
        return self.stretch_m * self.angle

    @property
    def curvature_1_m(self) -> float:
        """Of the curve: radius / stretch^2."""
        return self.radius_m / self.stretch_m**2

    def place(self, arc_m: Array) -> Array:
        """Places (.., 3) at arc lengths (..)."""
        turn = np.asarray(arc_m) / self.stretch_m
        return np.stack(
            (self.rise_m * turn, self.radius_m * np.cos(turn), self.radius_m * np.sin(turn)), axis=-1
        )

    def frame(self, arc_m: Array) -> Array:
        """Unit tangent, inward normal and binormal as rows (.., 3, 3) (Frenet)."""
        turn = np.asarray(arc_m) / self.stretch_m
        cosine, sine = np.cos(turn), np.sin(turn)
        rise, radius = self.rise_m / self.stretch_m, self.radius_m / self.stretch_m
        tangent = np.stack((np.full_like(turn, rise), -radius * sine, radius * cosine), axis=-1)
        normal = np.stack((np.zeros_like(turn), -cosine, -sine), axis=-1)
        return np.stack((tangent, normal, np.cross(tangent, normal)), axis=-2)

    def nearest(self, points_m: Array) -> Array:
        """Arc lengths (k,) of the places nearest to points (k, 3)."""
        x, y, z = points_m.T
        around = np.arctan2(z, y)
        turns = np.floor((x / self.rise_m - around) / (2.0 * np.pi))
        tried = [around + 2.0 * np.pi * (turns + step) for step in (-1.0, 0.0, 1.0, 2.0)]
        tried += [np.zeros_like(x), np.full_like(x, self.angle)]
        candidates = np.clip(np.stack(tried), 0.0, self.angle)
        far = np.linalg.norm(self.place(candidates * self.stretch_m) - points_m, axis=-1)
        turn = candidates[np.argmin(far, axis=0), np.arange(len(x))]
        for _ in range(_NEWTON):
            # d/dturn of half the squared distance, and a curvature kept positive.
            slope = self.rise_m * (self.rise_m * turn - x) + self.radius_m * (y * np.sin(turn) - z * np.cos(turn))
            bend = self.rise_m**2 + self.radius_m * (y * np.cos(turn) + z * np.sin(turn))
            turn = np.clip(turn - slope / np.maximum(bend, 0.25 * self.stretch_m**2), 0.0, self.angle)
        return np.asarray(turn * self.stretch_m)
