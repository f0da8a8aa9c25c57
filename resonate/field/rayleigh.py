"""Flat faces in a wide baffle: Rayleigh's sum over the moving surface."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from resonate.field.samples import frozen, simple_sources

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.field.doubts import Doubt
    from resonate.field.samples import Samples

    Array = NDArray[np.float64]
    ComplexArray = NDArray[np.complex128]


@dataclass(frozen=True, slots=True)
class BaffledFace:
    """A skin or plate in an endless rigid baffle (satisfies ``Transfer``).

    Parameters
    ----------
    samples : Samples
        Samples of the face.
    motion : Array
        (h, n) displacement along the normal in each sounding mode, kg**-0.5.
    normals : Array
        (n, 3) unit normals.
    area_m2 : Array
        (n,) area of each sample.
    doubts : tuple[Doubt, ...]
        What the model leaves out.

    Notes
    -----
    Both sides of the face are served. Behind it the pressure has the opposite sign, because the face
    moves away there. Without a baffle the two sides would short-circuit where
    the face is small against the wavelength; this model does not hold there and says so.
    """

    samples: Samples
    motion: Array
    normals: Array
    area_m2: Array
    doubts: tuple[Doubt, ...] = ()

    def __post_init__(self) -> None:
        """Copy and freeze."""
        for name in ("motion", "normals", "area_m2"):
            object.__setattr__(self, name, frozen(getattr(self, name)))

    @property
    def radius_m(self) -> float:
        """Half the extent of the face."""
        return self.samples.radius_m

    def weights(self, place_m: Array, reference_m: float) -> ComplexArray:
        """Pressure per unit modal acceleration.

        Parameters
        ----------
        place_m : Array
            (3,) place of the microphone in the body frame, m.
        reference_m : float
            Distance whose delay is left out of the phases, m.

        Returns
        -------
        ComplexArray
            (m,) weights w, Pa s^2 m^-1 kg^-1/2: ``p(t) = Re[w a(t - reference_m / c)]``.

        References
        ----------
        Rayleigh, The Theory of Sound vol. 2 (1896), section 278.
        Kinsler, Frey, Coppens & Sanders, Fundamentals of Acoustics 4th ed. (2000), section 7.4.
        """
        samples = self.samples
        rays = samples.rays(place_m)
        distance = np.sqrt(np.einsum("ni,ni->n", rays, rays))
        side = 1.0 if float(self.area_m2 @ np.einsum("ni,ni->n", rays, self.normals)) >= 0.0 else -1.0
        spread = side * samples.air.density_kg_m3 / (2.0 * np.pi) * self.area_m2 / distance
        return simple_sources(samples, self.motion, spread, distance_m=distance, reference_m=reference_m)
