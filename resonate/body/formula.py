"""Bodies whose kinetic and potential energies a person wrote: modes from the second derivatives at rest.

Everything that is seen, struck or heard hangs on the points of the mesh: a place near one of them is carried along as
``position`` carries it, to first order round rest.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Literal

import numpy as np
from scipy.sparse import csr_matrix, eye_array

from resonate.body.balls import Balls
from resonate.body.body import Forms, Inertia, Radiator, Surface, SurfaceSpot
from resonate.body.described import Described
from resonate.body.display import join
from resonate.body.formula_rest import Rest, find_rest, glides_at
from resonate.body.tape import evaluate
from resonate.errors import BodyError
from resonate.scene.model import FormulaShape

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.scene.model import BodySpec, SpotSpec

    Array = NDArray[np.float64]

# Added air of a disc that moves along its axis, against the cube of its radius (Lamb, Hydrodynamics, art. 102).
_DISC = 8.0 / 3.0
# Where the mesh is not moved by what it is made of, all its points lie on one place.
_ALIKE = 1e-9
# Points carried at a time: every operation of a formula keeps its derivatives for all of them.
_CHUNK = 500


@dataclass(frozen=True, slots=True)
class _Carried:
    """Where reference points (p, 3) lie at rest (p, 3), by coordinates (p, 3, n), and by the points (p, 3, 3)."""

    place_m: Array
    by_coordinate: Array
    by_point: Array


@dataclass(frozen=True)
class FormulaBody(Described):
    """A body given by T and V; satisfies ``Body``.

    Parameters
    ----------
    spec : BodySpec
        What the scene asks.
    key : str
        Content hash.
    """

    spec: BodySpec
    key: str
    family: Literal["lump"] = "lump"
    #: Its potential says what holds it: it never moves as a whole.
    free: bool = False
    held: bool = False

    @property
    def shape(self) -> FormulaShape:
        """Coordinates, energies and mesh."""
        assert isinstance(self.spec.shape, FormulaShape)  # noqa: S101 (the caller sorts the kinds)
        return self.spec.shape

    @property
    def freedoms(self) -> int:
        """Number of coordinates."""
        return len(self.shape.coordinates)

    @property
    def warnings(self) -> tuple[str, ...]:
        """None of its own."""
        return ()

    @property
    def thickness_m(self) -> float:
        """Of balls and rods."""
        return self.shape.mesh.width_m

    @cached_property
    def linear_reach_m(self) -> float:
        """Deflection above which the potential leaves its parabola by 5 %."""
        return glides_at(self.shape, self.rest, self._points.by_coordinate)

    @cached_property
    def rest(self) -> Rest:
        """Coordinates at rest, with mass and stiffness."""
        return find_rest(self.shape, name=self.name)

    def _carry(self, points: Array) -> _Carried:
        parts = [self._carried(points[begin : begin + _CHUNK]) for begin in range(0, len(points), _CHUNK)]
        return _Carried(
            np.concatenate([part.place_m for part in parts]),
            np.concatenate([part.by_coordinate for part in parts]),
            np.concatenate([part.by_point for part in parts]),
        )

    def _carried(self, points: Array) -> _Carried:
        count, rest = self.freedoms, self.rest.place
        at = np.hstack([np.broadcast_to(rest, (len(points), count)), points])
        axes = [evaluate(self.shape.place_tape(axis), at, by=count + 3, curved=False) for axis in range(3)]
        place = np.stack([axis.value for axis in axes], axis=1)
        slope = np.stack([axis.slope for axis in axes], axis=1)
        if not (np.all(np.isfinite(place)) and np.all(np.isfinite(slope))):
            raise BodyError(
                what="position is not a number at rest for some point of the mesh",
                where=f"body {self.name!r}",
                fix="look for a division by zero, a root below 0 or a kink such as abs(x) at a point of the mesh",
            )
        return _Carried(place, slope[:, :, :count], slope[:, :, count:])

    @cached_property
    def _reference(self) -> Array:
        return np.array(self.shape.mesh.points)

    @cached_property
    def _points(self) -> _Carried:
        points = self._carry(self._reference)
        spread = float(np.ptp(self._reference, axis=0).max())
        if spread > 0.0 and float(np.ptp(points.place_m, axis=0).max()) <= _ALIKE * spread:
            raise BodyError(
                what="all points of the mesh lie on one place: position does not speak of x, y and z",
                where=f"body {self.name!r}",
                fix='say where the point x, y, z of the mesh goes, as in ["x + u", "y", "z"]',
            )
        return points

    @cached_property
    def balls(self) -> Balls:
        """The points of the mesh at rest."""
        return self._balls(self._points.place_m)

    def _balls(self, place_m: Array) -> Balls:
        count = len(place_m)
        return Balls(place_m, np.full(count, 0.5 * self.shape.mesh.width_m), tuple(str(k + 1) for k in range(count)))

    @cached_property
    def inertia(self) -> Inertia:
        """What the points of the mesh would have to weigh together to carry the kinetic energy."""
        moved = np.einsum("pin,pin->n", self._points.by_coordinate, self._points.by_coordinate) / len(self._reference)
        carried = np.diag(self.rest.mass)
        seen = moved > 0.0
        mass = float(np.mean(carried[seen] / moved[seen])) if seen.any() else float(carried.mean())
        centre = self._points.place_m.mean(axis=0)
        arm = self._points.place_m - centre
        spread = mass * np.einsum("pi,pj->ij", arm, arm) / len(arm)
        ball = 0.1 * mass * self.shape.mesh.width_m**2
        return Inertia(mass, centre, np.trace(spread) * np.eye(3) - spread + ball * np.eye(3))

    @cached_property
    def surface(self) -> Surface:
        """Balls, rods and faces, each vertex where ``position`` has it at rest."""
        assert len(self._points.place_m)  # noqa: S101 (refuses a mesh that position forgets)
        mesh, balls = self.shape.mesh, self._balls(self._reference)
        sheets = [balls.ball(number) for number in range(len(self._reference))]
        rods = [balls.rod(one - 1, other - 1) for one, other in mesh.edges]
        sheets += [rod for rod in rods if rod is not None]
        for face in mesh.faces:
            corners = self._reference[[number - 1 for number in face]]
            fan = np.array([[0, k, k + 1] for k in range(1, len(face) - 1)], dtype=np.int64)
            sheets += [(corners, fan), (corners, fan[:, ::-1])]
        return join([(self._carry(points).place_m, triangles) for points, triangles in sheets])

    @cached_property
    def radiator(self) -> Radiator:
        """Compact dipoles: balls (Lamb 1932, art. 92), and faces as discs of their area."""
        points = self._points.place_m
        half = 0.5 * self.shape.mesh.width_m
        weights = [np.full((len(points), 3), 2.0 * np.pi * half**3)]
        places, normals = [points], [np.broadcast_to([0.0, 1.0, 0.0], points.shape)]
        for face in self.shape.mesh.faces:
            corners = points[[number - 1 for number in face]]
            fan = np.cross(corners[1:-1] - corners[0], corners[2:] - corners[0]).sum(axis=0)
            area = 0.5 * float(np.linalg.norm(fan))
            if area == 0.0:
                continue
            normal = 0.5 * fan / area
            half = max(half, float(np.sqrt(area / np.pi)))
            places.append(corners.mean(axis=0)[None])
            normals.append(normal[None])
            weights.append(_DISC * (area / np.pi) ** 1.5 * normal[None] ** 2)
        parts = [np.concatenate(part) for part in (places, normals, weights)]
        return Radiator("dipoles", parts[0], parts[1], parts[2], half_m=half)

    def probe(self, points_m: Array) -> csr_matrix:
        """Displacement (3 k, d) of the matter at ``points_m`` (k, 3)."""
        points = np.atleast_2d(points_m)
        near = self.balls.nearest(points)
        # Back to the mesh as it is written: exact where position turns and shifts it.
        back = np.linalg.pinv(self._points.by_point[near], rcond=1e-9)
        reference = self._reference[near] + np.einsum("pij,pj->pi", back, points - self._points.place_m[near])
        return csr_matrix(self._carry(reference).by_coordinate.reshape(3 * len(points), self.freedoms))

    def spot(self, spot: SpotSpec) -> SurfaceSpot:
        """Find a spot on a ball of the mesh."""
        return self.balls.spot(self.spec, spot)

    def forms(self) -> Forms:
        """Second derivatives of T and V at rest."""
        count = self.freedoms
        return Forms(
            stiffness=csr_matrix(self.rest.stiffness),
            mass=csr_matrix(self.rest.mass),
            basis=csr_matrix(eye_array(count)),
            cords=None,
            springs=None,
            damper_rows=csr_matrix((0, count)),
            damper_ns_m=np.zeros(0),
            heat=(),
        )
