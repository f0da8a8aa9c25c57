"""Lines that shake the air: compact dipoles along bars, tubes and strings."""

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


@dataclass(frozen=True, slots=True)
class DipoleLine:
    """Slices of a line, each a compact dipole (satisfies ``Transfer``).

    Parameters
    ----------
    samples : Samples
        Samples along the line.
    motion : Array
        (3, h, n) displacement along body x, y and z in each sounding mode, kg**-0.5.
    volume_m3 : Array
        (n, 3) displaced plus added volume of each slice, for motion along body x, y and z.
    doubts : tuple[Doubt, ...]
        What the model leaves out.

    Notes
    -----
    A slice that moves with acceleration a pushes on the air with the force
    ``F = density * (displaced + added volume) * a``. Holds where the cross-section is small against
    the wavelength; the pressure is
    ``p = j k cos(angle) F exp(-j k r) / (4 pi r) * (1 + 1 / (j k r))``.
    """

    samples: Samples
    motion: Array
    volume_m3: Array
    doubts: tuple[Doubt, ...] = ()

    def __post_init__(self) -> None:
        """Copy and freeze."""
        object.__setattr__(self, "motion", frozen(self.motion))
        object.__setattr__(self, "volume_m3", frozen(self.volume_m3))

    @property
    def radius_m(self) -> float:
        """Half the length of the line."""
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
        Landau & Lifshitz, Fluid Mechanics 2nd ed. (1987), section 74.
        Pierce, Acoustics (1989), section 4.3 (compact dipoles).
        """
        samples = self.samples
        rays = samples.rays(place_m)
        distance = np.sqrt(np.einsum("ni,ni->n", rays, rays))
        spread = samples.air.density_kg_m3 / (4.0 * np.pi) * self.volume_m3 * rays / distance[:, None] ** 2
        decay = np.stack((np.ones_like(distance), 1.0 / distance), axis=1)
        heard = np.empty(samples.count, dtype=np.complex128)
        for part in samples.chunks():
            push = self.motion[0, part] * spread[:, 0]
            push += self.motion[1, part] * spread[:, 1]
            push += self.motion[2, part] * spread[:, 2]
            wavenumber = samples.wavenumber_1_m[part]
            turned = phasor(wavenumber[:, None] * (reference_m - distance))
            real, imaginary = (push * turned.cosine) @ decay, (push * turned.sine) @ decay
            far, near = (real + 1j * imaginary).T
            heard[part] = 1j * wavenumber * far + near
        return samples.padded(heard)
