"""Point masses and springs: T = sum m v^2/2, V = sum k (distance - rest)^2/2 and the weights.

The rest state is found, not assumed: springs may be stretched when it is placed, and weight pulls on what is held.
Second derivatives there (a spring of tension F over the distance L resists along itself by k, across by F/L) give the
modes.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Literal

import numpy as np
from scipy.sparse import csr_matrix, diags

from resonate.body.balls import Balls
from resonate.body.body import Forms, Inertia, Radiator, Surface, SurfaceSpot
from resonate.body.described import Described
from resonate.body.display import join
from resonate.body.reduce import reduced
from resonate.body.support import Held, Supports, supports
from resonate.errors import BodyError
from resonate.scene.model import BoxPlace, LumpsShape, NamedPlace

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.scene.model import BodySpec, HoldSpec, SpotSpec

    Array = NDArray[np.float64]

# Springs that swing aside by more than this share of their length change the stiffness of what they hold.
_BENT = 0.1
# A rest state further than this share of the whole from where the points were placed is told.
_SAGS = 0.01
# Forces balance to this share of the largest; steps to get there, and how far one may go against the whole.
_BALANCED, _STEPS, _STRIDE = 1e-11, 400, 0.1
_ROUNDING = 4e-15
_LEAST_SIZE = 1e-9


@dataclass(frozen=True, slots=True)
class Springs:
    """``one``, ``other`` (s,) the points they join; ``stiffness`` N/m, ``rest`` m, ``damper`` N s/m, each (s,)."""

    one: NDArray[np.int64]
    other: NDArray[np.int64]
    stiffness: Array
    rest: Array
    damper: Array

    @classmethod
    def of(cls, shape: LumpsShape) -> Springs:
        """Read off a shape, distances as placed standing for lengths at rest that are not given."""
        number = {point.name: place for place, point in enumerate(shape.points)}
        place = np.array([point.place_m for point in shape.points])
        ends = np.array([[number[name] for name in link.between] for link in shape.springs], dtype=np.int64)
        one, other = ends.reshape(-1, 2).T
        span = np.linalg.norm(place[other] - place[one], axis=1)
        rest = [link.rest_m for link in shape.springs]
        return cls(
            one,
            other,
            np.array([link.stiffness_n_m for link in shape.springs]),
            np.array([span[k] if given is None else given for k, given in enumerate(rest)]),
            np.array([link.damping_ns_m for link in shape.springs]),
        )

    def along(self, place_m: Array) -> tuple[Array, Array]:
        """Length (s,) and unit direction (s, 3) from ``one`` to ``other``."""
        arm = place_m[self.other] - place_m[self.one]
        length = np.linalg.norm(arm, axis=1)
        return length, arm / np.maximum(length, 1e-300)[:, None]

    def energy(self, place_m: Array) -> float:
        """Strain energy, J."""
        return 0.5 * float(self.stiffness @ (self.along(place_m)[0] - self.rest) ** 2)

    def force(self, place_m: Array) -> Array:
        """Slope of the energy (3 n,), N."""
        length, unit = self.along(place_m)
        pull = (self.stiffness * (length - self.rest))[:, None] * unit
        total = np.zeros_like(place_m)
        np.add.at(total, self.other, pull)
        np.add.at(total, self.one, -pull)
        return total.ravel()

    def curvature(self, place_m: Array) -> csr_matrix:
        """Second derivative of the energy (3 n, 3 n), N/m."""
        length, unit = self.along(place_m)
        # F/L; of a spring without length at rest, which pulls like k in every direction, it is k itself.
        across = np.where(
            self.rest == 0.0, self.stiffness, self.stiffness * (1.0 - self.rest / np.maximum(length, 1e-300))
        )
        outer = unit[:, :, None] * unit[:, None, :]
        local = self.stiffness[:, None, None] * outer + across[:, None, None] * (np.eye(3) - outer)
        rows = self._rows(3, np.broadcast_to(np.eye(3), (len(length), 3, 3)), len(place_m))
        from scipy.sparse import block_diag

        if not len(length):
            return csr_matrix((3 * len(place_m), 3 * len(place_m)))
        total = (rows.T @ block_diag(list(local), format="csr") @ rows).tocsr()
        return csr_matrix(0.5 * (total + total.T))

    def stretch(self, place_m: Array) -> csr_matrix:
        """Rows (s, 3 n): by how much each spring lengthens."""
        return self._rows(1, self.along(place_m)[1][:, None, :], len(place_m))

    def _rows(self, count: int, gain: Array, points: int) -> csr_matrix:
        springs = len(self.one)
        rows = np.repeat(np.arange(springs * count), 3)
        columns = [np.repeat(end, count)[:, None] * 3 + np.arange(3) for end in (self.other, self.one)]
        flat = gain.reshape(-1)
        entries = np.concatenate((flat, -flat))
        places = (np.tile(rows, 2), np.concatenate([part.ravel() for part in columns]))
        return csr_matrix((entries, places), shape=(springs * count, 3 * points))


@dataclass(frozen=True)
class LumpsBody(Described):
    """Point masses and springs; satisfies ``Body``.

    Parameters
    ----------
    spec : BodySpec
        What the scene asks.
    key : str
        Content hash.
    gravity_m_s2 : float
        Weight pulls on points of a body that something holds.
    up : Array
        (3,) unit vector against gravity in the body frame.
    """

    spec: BodySpec
    key: str
    gravity_m_s2: float
    up: Array
    family: Literal["lump"] = "lump"

    @property
    def shape(self) -> LumpsShape:
        """Points and springs."""
        assert isinstance(self.spec.shape, LumpsShape)  # noqa: S101 (the caller sorts the kinds)
        return self.spec.shape

    @cached_property
    def mass_kg(self) -> Array:
        """Mass (n,) of every point."""
        return np.array([point.mass_kg for point in self.shape.points])

    @cached_property
    def springs(self) -> Springs:
        """The springs between points."""
        return Springs.of(self.shape)

    @property
    def freedoms(self) -> int:
        """Three for each point."""
        return 3 * len(self.mass_kg)

    @property
    def warnings(self) -> tuple[str, ...]:
        """What a person should know."""
        moved = np.linalg.norm(self.rest_m - self._placed, axis=1)
        far = int(np.argmax(moved))
        if moved[far] <= _SAGS * self.balls.size_m:
            return ()
        point = self.shape.points[far].name
        return (
            f"body {self.name!r}: at rest its point {point!r} is {moved[far]:.3g} m from where it was placed, "
            "pulled there by weight and springs; modes and picture start from rest",
        )

    @property
    def thickness_m(self) -> float:
        """The smallest ball."""
        return 2.0 * float(self.balls.radius_m.min())

    @property
    def linear_reach_m(self) -> float:
        """Deflection above which the linear energies are not enough."""
        length, _ = self.springs.along(self.rest_m)
        return _BENT * float(length.min(initial=self.balls.size_m))

    @cached_property
    def _placed(self) -> Array:
        return np.array([point.place_m for point in self.shape.points])

    @cached_property
    def rest_m(self) -> Array:
        """Places (n, 3) where weight, springs and supports balance."""
        held = self._supports_at(self._placed)
        weight = 0.0 if self.free or self.spec.held or self.spec.floating else self.gravity_m_s2
        pull = np.outer(self.mass_kg * weight, self.up).ravel()
        free = held.basis
        extra = held.springs if held.springs is not None else csr_matrix((self.freedoms, self.freedoms))
        size = max(float(np.ptp(self._placed, axis=0).max()), float(self.balls_at(self._placed).radius_m.max()))

        def energy(moved: Array) -> float:
            place = self._placed + moved.reshape(-1, 3)
            return self.springs.energy(place) + float(pull @ moved) + 0.5 * float(moved @ (extra @ moved))

        scale = float(np.abs(pull).max(initial=0.0)) + float(np.abs(self.springs.force(self._placed)).max(initial=0.0))
        # Rounding in places alone makes stiff springs pull so much.
        noise = _ROUNDING * size * float(self.springs.stiffness.max(initial=0.0))
        moved, damping = np.zeros(self.freedoms), 0.0
        for _ in range(_STEPS):
            place = self._placed + moved.reshape(-1, 3)
            slope = free.T @ (self.springs.force(place) + pull + extra @ moved)
            if float(np.abs(slope).max(initial=0.0)) <= max(_BALANCED * scale, noise):
                return place
            bend = (free.T @ (self.springs.curvature(place) + extra) @ free).toarray()
            value, vector = np.linalg.eigh(bend)
            least = 1e-12 * float(np.abs(value).max(initial=0.0)) + 1e-300
            step = vector @ (-(vector.T @ slope) / np.maximum(np.abs(value) + damping, least))
            step *= min(1.0, _STRIDE * size / max(float(np.abs(step).max()), 1e-300))
            tried = moved + free @ step
            if energy(tried) <= energy(moved) + 1e-14 * abs(energy(moved)):
                moved, damping = tried, 0.1 * damping
            else:
                damping = max(10.0 * damping, 1e-3 * float(np.abs(value).max()))
        raise BodyError(
            what="its points find no place to rest: forces do not balance",
            where=f"body {self.name!r}",
            fix="hold it where its weight pulls (a spring holds along itself only), or set floating = true",
        )

    def balls_at(self, place_m: Array) -> Balls:
        """Draw every point as a ball of its mass in the body's material."""
        radius = (3.0 * self.mass_kg / (4.0 * np.pi * self.spec.material.density_kg_m3)) ** (1.0 / 3.0)
        return Balls(place_m, radius, tuple(point.name for point in self.shape.points))

    @cached_property
    def balls(self) -> Balls:
        """The points at rest."""
        return self.balls_at(self.rest_m)

    @cached_property
    def inertia(self) -> Inertia:
        """Mass properties of the points."""
        mass = float(self.mass_kg.sum())
        centre = self.mass_kg @ self.rest_m / mass
        arm = self.rest_m - centre
        spread = np.einsum("n,ni,nj->ij", self.mass_kg, arm, arm)
        tensor = np.trace(spread) * np.eye(3) - spread
        if self.free and float(np.linalg.eigvalsh(tensor)[0]) <= _LEAST_SIZE * mass * self.balls.size_m**2:
            raise BodyError(
                what="free points on one line have no moment of inertia about it",
                where=f"body {self.name!r}",
                fix="hold it somewhere, or give it a point off that line",
            )
        return Inertia(mass, centre, tensor)

    @cached_property
    def surface(self) -> Surface:
        """Balls, and thin rods for the springs."""
        balls = self.balls
        ends = zip(self.springs.one.tolist(), self.springs.other.tolist(), strict=True)
        rods = {(min(pair), max(pair)) for pair in ends}
        sheets = [balls.ball(number) for number in range(len(self.mass_kg))]
        sheets += [rod for rod in (balls.rod(*pair) for pair in sorted(rods)) if rod is not None]
        return join(sheets)

    @cached_property
    def radiator(self) -> Radiator:
        """Compact dipoles: a ball drives away its own volume of air and half as much again (Lamb 1932, art. 92)."""
        volume = 2.0 * np.pi * self.balls.radius_m**3
        normals = np.broadcast_to([0.0, 1.0, 0.0], self.rest_m.shape).copy()
        half_m = float(self.balls.radius_m.max())
        return Radiator("dipoles", self.rest_m, normals, np.repeat(volume[:, None], 3, axis=1), half_m=half_m)

    def probe(self, points_m: Array) -> csr_matrix:
        """Displacement (3 k, d) of the balls nearest to ``points_m`` (k, 3)."""
        number = self.balls.nearest(np.atleast_2d(points_m))
        return _picked(number, self.freedoms)

    def motion(self, points_m: Array) -> csr_matrix:
        """Three displacements and three rotations (6 k, d); points do not turn."""
        points = np.atleast_2d(points_m)
        far = np.linalg.norm(points[:, None] - self._placed, axis=2)
        moves = _picked(np.asarray(np.argmin(far, axis=1), dtype=np.int64), self.freedoms).tocoo()
        rows = moves.row // 3 * 6 + moves.row % 3
        return csr_matrix((moves.data, (rows, moves.col)), shape=(6 * len(points), self.freedoms))

    def turn(self, point_m: Array) -> csr_matrix:
        """Points do not turn."""
        return self.motion(point_m)[3:]

    def unused(self) -> NDArray[np.int64]:
        """None."""
        return np.zeros(0, dtype=np.int64)

    def select(self, hold: HoldSpec) -> Held:
        """Find the points of one support, where they were placed."""
        where, placed = hold.where, self._placed
        if isinstance(where, NamedPlace):
            names = [point.name for point in self.shape.points]
            chosen = range(len(names)) if "all" in where.names else [names.index(name) for name in where.names]
            points = placed[list(chosen)]
        elif isinstance(where, BoxPlace):
            inside = np.all((placed >= np.array(where.low_m)) & (placed <= np.array(where.high_m)), axis=1)
            points = placed[inside]
            if not len(points):
                raise BodyError(
                    what="the box of a support holds no point of the body",
                    where=f"body {self.name!r}",
                    fix="make it larger, or name the points",
                )
        else:
            far = np.linalg.norm(placed - np.array(where.point_m), axis=1)
            points = placed[[int(np.argmin(far))]]
            if float(far.min()) > _SAGS * max(float(np.ptp(placed, axis=0).max()), self.thickness_placed_m):
                raise BodyError(
                    what=f"a support at {list(where.point_m)} m, {far.min():g} m off the nearest point",
                    where=f"body {self.name!r}",
                    fix="name the point, or give its place in the body's own frame",
                )
        # A spring holds each of the points, not all of them together.
        return Held(points, np.ones(len(points)), places=len(points))

    @property
    def thickness_placed_m(self) -> float:
        """The largest ball."""
        return 2.0 * float(self.balls_at(self._placed).radius_m.max())

    def spot(self, spot: SpotSpec) -> SurfaceSpot:
        """Find a spot on a ball."""
        return self.balls.spot(self.spec, spot)

    def _supports_at(self, place_m: Array) -> Supports:
        centre = self.mass_kg @ place_m / float(self.mass_kg.sum())
        return supports(self, self.spec.support, up=self.up, weight_n=0.0, centre_m=centre, line=True)

    def forms(self) -> Forms:
        """Second derivatives of T and V at rest."""
        mass = csr_matrix(diags(np.repeat(self.mass_kg, 3)))
        found = reduced(self.springs.curvature(self.rest_m), mass, self._supports_at(self._placed), ())
        damped = self.springs.damper > 0.0
        if not damped.any():
            return found
        from dataclasses import replace

        from scipy.sparse import vstack

        rows = (self.springs.stretch(self.rest_m)[damped] @ found.basis).tocsr()
        moving = np.diff(rows.indptr) > 0
        return replace(
            found,
            damper_rows=vstack((found.damper_rows, rows[moving])).tocsr(),
            damper_ns_m=np.concatenate((found.damper_ns_m, self.springs.damper[damped][moving])),
        )


def _picked(number: NDArray[np.int64], freedoms: int) -> csr_matrix:
    columns = (number[:, None] * 3 + np.arange(3)).ravel()
    rows = np.arange(len(columns))
    return csr_matrix((np.ones(len(columns)), (rows, columns)), shape=(len(columns), freedoms))
