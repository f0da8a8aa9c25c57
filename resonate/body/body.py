"""What a body is to every later room: matter with a shape, given by its two energies."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal, Protocol

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray
    from scipy.sparse import csr_matrix

    from resonate.scene.model import BandSpec, SpotSpec

    Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Inertia:
    """Mass properties from the same kinetic energy that the modes use.

    ``mass_kg``; ``centre_m`` (3,) in the body frame; ``tensor`` (3, 3) about the centre, kg m^2.
    """

    mass_kg: float
    centre_m: Array
    tensor: Array


@dataclass(frozen=True, slots=True)
class Surface:
    """The closed display mesh, in the body frame at rest.

    ``points_m`` (n, 3); ``normals`` (n, 3) outward, unit; ``triangles`` (t, 3) counter-clockwise from outside.
    """

    points_m: Array
    normals: Array
    triangles: NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Radiator:
    """Samples of the vibrating surface for the radiation model.

    ``kind`` is ``baffled`` (flat faces: ``weights`` (n, 3) holds the area, m^2, in column 0), ``closed`` (the same
    for the whole surface of a body) or
    ``dipoles`` (slices of a line: ``weights`` is the displaced plus added volume, m^3, for motion
    along body x, y, z). ``points_m`` (n, 3), ``normals`` (n, 3). ``half_m``: half the thickness of the slices where
    they do not lie on one straight line.
    """

    kind: Literal["baffled", "dipoles", "surface", "closed"]
    points_m: Array
    normals: Array
    weights: Array
    half_m: float | None = None


@dataclass(frozen=True, slots=True)
class SurfaceSpot:
    """One point of the surface, as contact needs it.

    ``point_m`` (3,) and outward ``normal`` (3,) in the body frame; ``curvature_1_m`` the two principal
    curvatures (positive convex, 0 flat); ``young_pa`` and ``poisson`` of the material under the
    point (``inf`` where the skin is too thin to have a compliance of its own);
    ``thickness_m`` the local thickness. ``mobility_power``: the power of frequency that the mean mobility follows
    beyond the mesh, where it is known better than a mesh can tell (0 on a plate, whose impedance is
    8 sqrt(D rho h)); None: as the static compliance has it. ``spread_m``: radius of the smallest patch that the mesh
    resolves, where the body's own energies hold the give of a half-space under it (solids); 0 where they do not.
    """

    point_m: Array
    normal: Array
    curvature_1_m: tuple[float, float]
    young_pa: float
    poisson: float
    thickness_m: float
    mobility_power: float | None = None
    wave_mobility_s_kg: float = 0.0
    spread_m: float = 0.0


@dataclass(frozen=True, slots=True)
class HeatForm:
    """Where thermoelastic loss arises, as a quadratic form.

    ``operator`` (q, f): row j times a shape, squared, is (relaxation strength x strain energy) of sample j
    such that ``eta = sum_j (C phi)_j**2 * x_j/(1 + x_j**2) / omega**2`` with
    ``x_j = omega * relaxation_s[j]`` (Zener 1938).
    """

    operator: csr_matrix
    relaxation_s: Array


@dataclass(frozen=True, slots=True)
class Forms:
    """The second derivatives of T and V, over the freedoms that the supports leave.

    ``stiffness`` and ``mass`` (f, f), N/m and kg; ``basis`` (d, f) maps free to all freedoms;
    ``cords`` and ``springs`` (f, f) the parts of the stiffness that belong to supports; ``damper_rows`` (k, f) with
    ``damper_ns_m`` (k,): support dashpots; ``heat``: thermoelastic loss.
    """

    stiffness: csr_matrix
    mass: csr_matrix
    basis: csr_matrix
    cords: csr_matrix | None
    springs: csr_matrix | None
    damper_rows: csr_matrix
    damper_ns_m: Array
    heat: tuple[HeatForm, ...]


class Body(Protocol):
    """A body ready to be solved, struck, heard and seen."""

    @property
    def name(self) -> str:
        """The name given in the scene."""

    @property
    def family(self) -> Literal["line", "skin", "wall", "solid", "lump"]:
        """Which group of shapes it belongs to."""

    @property
    def key(self) -> str:
        """Hash of everything the modes depend on (shape, material, support, mesh, version)."""

    @property
    def freedoms(self) -> int:
        """Number of generalized coordinates before supports, d."""

    @property
    def free(self) -> bool:
        """True when nothing supports it, so that it moves as a whole."""

    @property
    def held(self) -> bool:
        """True when it must not move as a whole although nothing supports it."""

    @property
    def bands(self) -> BandSpec:
        """The bands asked for."""

    @property
    def loss(self) -> tuple[tuple[float, float], ...]:
        """Material loss factor as (hertz, eta) points, log-interpolated."""

    @property
    def inertia(self) -> Inertia:
        """Mass, centre and inertia tensor."""

    @property
    def surface(self) -> Surface:
        """The display mesh."""

    @property
    def radiator(self) -> Radiator:
        """The radiating samples."""

    @property
    def thickness_m(self) -> float:
        """Smallest wall."""

    @property
    def linear_reach_m(self) -> float:
        """Deflection above which the linear energies are not enough."""

    @property
    def warnings(self) -> tuple[str, ...]:
        """What a person should know (a mesh capped by its budget, for instance)."""

    def forms(self) -> Forms:
        """Assemble the energies (the expensive part, not needed when the modes are stored)."""

    def probe(self, points_m: Array) -> csr_matrix:
        """Displacement (3 k, d) of the material points nearest to ``points_m`` (k, 3)."""

    def spot(self, spot: SpotSpec) -> SurfaceSpot:
        """Find a spot; raises ``BodyError`` when it is off the body."""
