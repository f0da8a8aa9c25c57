"""Vessels: the outside of a wall as a sum of simple sources in free space."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from resonate.field.samples import frozen, phasor

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
class FreeShell:
    """The outside of a vessel in free space (satisfies ``Transfer``).

    Parameters
    ----------
    samples : Samples
        Samples of the outside.
    motion : Array
        (h, n) displacement along the outward normal in each sounding mode, kg**-0.5.
    area_m2 : Array
        (n,) area of each sample.
    doubts : tuple[Doubt, ...]
        What the model leaves out.

    Notes
    -----
    Every patch is a simple source, ``p = OVAL * density * area * acceleration * exp(-j k r)/(4 pi r)``. That is
    exact for the oval mode of a small closed sphere, 4.4 dB too loud for a breathing one and up to 1.6 dB too quiet
    for high orders. The body casts no shadow, and an open vessel is heard as if a lid closed it: neither the air
    inside nor what comes out of the mouth is there.
    """

    samples: Samples
    motion: Array
    area_m2: Array
    doubts: tuple[Doubt, ...] = ()

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
        Morse & Ingard, Theoretical Acoustics (1968), section 7.2 (multipoles of a sphere; from memory).
        """
        samples = self.samples
        rays = samples.rays(place_m)
        distance = np.sqrt(np.einsum("ni,ni->n", rays, rays))
        spread = OVAL * samples.air.density_kg_m3 / (4.0 * np.pi) * self.area_m2 / distance
        heard = np.empty(samples.count, dtype=np.complex128)
        for part in samples.chunks():
            turned = phasor(samples.wavenumber_1_m[part, None] * (reference_m - distance))
            motion = self.motion[part]
            heard[part].real = (motion * turned.cosine) @ spread
            heard[part].imag = (motion * turned.sine) @ spread
        return samples.padded(heard)
