"""Point masses as small balls on thin rods: what bodies without an extent of their own show, touch and radiate."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from resonate.body.body import SurfaceSpot
from resonate.errors import BodyError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.display import Sheet
    from resonate.scene.model import BodySpec, SpotSpec

    Array = NDArray[np.float64]
    IntArray = NDArray[np.int64]

# Steps from pole to pole and round a ball; sides of a rod and its thickness against the thinner ball.
_RINGS, _STEPS = 6, 10
_SIDES, _SLIM = 5, 0.3
# A spot further off a ball than this share of the whole is a mistake.
_REACH = 0.05


@dataclass(frozen=True, slots=True)
class Balls:
    """``centre_m`` (n, 3), ``radius_m`` (n,) and ``names`` of the points."""

    centre_m: Array
    radius_m: Array
    names: tuple[str, ...]

    @property
    def size_m(self) -> float:
        """Largest extent, balls included."""
        low, high = self.centre_m - self.radius_m[:, None], self.centre_m + self.radius_m[:, None]
        return float((high.max(axis=0) - low.min(axis=0)).max())

    def nearest(self, points_m: Array) -> IntArray:
        """Ball (k,) whose skin is nearest to each point (k, 3)."""
        far = np.linalg.norm(points_m[:, None] - self.centre_m, axis=2) - self.radius_m
        return np.asarray(np.argmin(far, axis=1), dtype=np.int64)

    def ball(self, number: int) -> Sheet:
        """A ball as a closed sheet."""
        polar = np.linspace(0.0, np.pi, _RINGS + 1)
        round_ = np.arange(_STEPS) / _STEPS * 2.0 * np.pi
        ring = np.stack(
            (
                np.sin(polar)[1:-1, None] * np.cos(round_),
                np.broadcast_to(np.cos(polar)[1:-1, None], (_RINGS - 1, _STEPS)),
                np.sin(polar)[1:-1, None] * np.sin(round_),
            ),
            axis=2,
        )
        poles = np.array([[0.0, 1.0, 0.0], [0.0, -1.0, 0.0]])
        points = self.centre_m[number] + self.radius_m[number] * np.concatenate((ring.reshape(-1, 3), poles))
        top, bottom = (_RINGS - 1) * _STEPS, (_RINGS - 1) * _STEPS + 1
        faces = []
        for step in range(_STEPS):
            after = (step + 1) % _STEPS
            faces.append([top, after, step])
            for row in range(_RINGS - 2):
                a, b = row * _STEPS + step, row * _STEPS + after
                faces += [[a, b, b + _STEPS], [a, b + _STEPS, a + _STEPS]]
            last = (_RINGS - 2) * _STEPS
            faces.append([bottom, last + step, last + after])
        return points, np.array(faces, dtype=np.int64)

    def rod(self, one: int, other: int) -> Sheet | None:
        """A thin rod between the middles of two balls, or None where they meet."""
        along = self.centre_m[other] - self.centre_m[one]
        length = float(np.linalg.norm(along))
        radius = _SLIM * float(min(self.radius_m[one], self.radius_m[other]))
        if length <= radius:
            return None
        seed = np.eye(3)[int(np.argmin(np.abs(along)))]
        first = np.cross(along, seed)
        first = first / np.linalg.norm(first)
        second = np.cross(along, first) / length
        angle = np.arange(_SIDES) / _SIDES * 2.0 * np.pi
        rim = radius * (np.cos(angle)[:, None] * first + np.sin(angle)[:, None] * second)
        points = np.concatenate((self.centre_m[one] + rim, self.centre_m[other] + rim))
        faces = []
        for side in range(_SIDES):
            after = (side + 1) % _SIDES
            faces += [[side, after, _SIDES + after], [side, _SIDES + after, _SIDES + side]]
        for side in range(1, _SIDES - 1):
            faces += [[0, side + 1, side], [_SIDES, _SIDES + side, _SIDES + side + 1]]
        return points, np.array(faces, dtype=np.int64)

    def spot(self, spec: BodySpec, spot: SpotSpec) -> SurfaceSpot:
        """Find a spot: the top of a named ball, the skin nearest to a point, or the ball furthest along a direction."""
        up = np.array([0.0, 1.0, 0.0])
        if spot.name is not None:
            number = 0 if spot.name == "all" else self.names.index(spot.name)
            return self._at(spec, number, up)
        if spot.toward is not None:
            toward = np.array(spot.toward) / np.linalg.norm(spot.toward)
            return self._at(spec, int(np.argmax(self.centre_m @ toward + self.radius_m)), toward)
        if spot.point_m is None:
            raise BodyError(
                what="fractions mean nothing on single points",
                where=f"body {spec.name!r}",
                fix=f"name one of {', '.join(self.names[:12])}, or give a point or a direction",
            )
        point = np.array(spot.point_m)
        number = int(self.nearest(point[None])[0])
        arm = point - self.centre_m[number]
        size = float(np.linalg.norm(arm))
        if size - self.radius_m[number] > _REACH * self.size_m:
            raise BodyError(
                what=f"the spot {point.tolist()} m lies {size - self.radius_m[number]:g} m off the nearest point, "
                f"{self.names[number]!r}",
                where=f"body {spec.name!r}",
                fix=f"name it, or give a place on its ball of {2.0 * self.radius_m[number]:g} m in the body's frame",
            )
        return self._at(spec, number, arm / size if size > 0.0 else up)

    def _at(self, spec: BodySpec, number: int, outward: Array) -> SurfaceSpot:
        radius = float(self.radius_m[number])
        material = spec.material
        return SurfaceSpot(
            self.centre_m[number] + radius * outward,
            outward,
            (1.0 / radius, 1.0 / radius),
            material.young_pa[2],
            material.poisson[0],
            2.0 * radius,
        )

