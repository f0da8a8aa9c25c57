"""Closed bodies in free space: simple sources on the moving surface."""

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


# A vibrating sphere of order l, small against the wavelength, is (2 l + 1)/(l + 1) times as loud as the sum of its
# simple sources: 1 breathing, 1.5 shaking, 5/3 for the oval mode that every vessel rings in, 2 for high orders.
OVAL = 5.0 / 3.0


@dataclass(frozen=True, slots=True)
class ClosedSurface:
    """A closed body in free space (satisfies ``Transfer``).

    Parameters
    ----------
    samples : Samples
        Samples of the surface.
    motion : Array
        (h, n) displacement along the outward normal in each sounding mode, kg**-0.5.
    area_m2 : Array
        (n,) area of each sample.
    doubts : tuple[Doubt, ...]
        What the model leaves out.
    gain : float
        By how much the modes that matter most are louder than the sum of their simple sources.

    Notes
    -----
    Every part of the surface pushes air out as a simple source; what the body itself scatters is left out. On a
    small ball whose surface moves as a spherical harmonic of degree n that makes (n + 1)/(2 n + 1) of the exact
    pressure: all of it for breathing, 2/3 for swaying, 3/5 for the first ringing mode, never less than half. An open
    vessel is heard as if a lid closed it: neither the air inside nor what comes out of the mouth is there.
    """

    samples: Samples
    motion: Array
    area_m2: Array
    doubts: tuple[Doubt, ...] = ()
    gain: float = 1.0

    def __post_init__(self) -> None:
        """Copy and freeze."""
        for name in ("motion", "area_m2"):
            object.__setattr__(self, name, frozen(getattr(self, name)))

    @property
    def radius_m(self) -> float:
        """Half the extent of the body."""
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
        Pierce, Acoustics (1989), sections 4.1 (simple sources) and 4.2 (spheres).
        Kinsler, Frey, Coppens & Sanders, Fundamentals of Acoustics 4th ed. (2000), section 7.2.
        """
        samples = self.samples
        rays = samples.rays(place_m)
        distance = np.sqrt(np.einsum("ni,ni->n", rays, rays))
        spread = self.gain * samples.air.density_kg_m3 / (4.0 * np.pi) * self.area_m2 / distance
        return simple_sources(samples, self.motion, spread, distance_m=distance, reference_m=reference_m)
