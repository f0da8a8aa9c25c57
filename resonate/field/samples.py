"""Where a body moves the air: its radiating samples and what its sounding modes do there."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from resonate.errors import BodyError

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from resonate.body.body import Body
    from resonate.field.air import Air
    from resonate.modes.modeset import ModeSet

    Array = NDArray[np.float64]

# Numbers in one chunk of a sum over modes and samples: the 120 kB of an intermediate stay in the cache.
CHUNK = 15_000


def frozen(values: Array) -> Array:
    """Contiguous read-only copy as float64."""
    copy = np.array(values, dtype=np.float64, order="C")
    copy.setflags(write=False)
    return copy


@dataclass(frozen=True, slots=True)
class Samples:
    """Radiating samples of one body and the sounding modes that move them.

    Modes above the heard band and swings of the whole body do not sound.

    Parameters
    ----------
    body : str
        Name of the body.
    points_m : Array
        (n, 3) samples in the body frame.
    wavenumber_1_m : Array
        (h,) wavenumber in air of each sounding mode.
    modes : int
        Number of modes m of the body, sounding or not.
    first : int
        The first that sounds.
    near_m : float
        A microphone closer to a sample than this cannot be served.
    air : Air
        The air outside.
    """

    body: str
    points_m: Array
    wavenumber_1_m: Array
    modes: int
    first: int
    near_m: float
    air: Air

    def __post_init__(self) -> None:
        """Copy and freeze."""
        for name in ("points_m", "wavenumber_1_m"):
            object.__setattr__(self, name, frozen(getattr(self, name)))

    @property
    def count(self) -> int:
        """Number of modes that sound, h."""
        return len(self.wavenumber_1_m)

    @property
    def radius_m(self) -> float:
        """Half the diagonal of the box round the samples."""
        return float(0.5 * np.linalg.norm(np.ptp(self.points_m, axis=0)))

    def rays(self, place_m: Array) -> Array:
        """Vectors (n, 3) from the samples to a place in the body frame.

        Raises
        ------
        BodyError
            If the place is inside the body or closer to it than the samples can serve.
        """
        rays = np.asarray(place_m, dtype=np.float64) - self.points_m
        nearest = float(np.sqrt(np.min(np.einsum("ni,ni->n", rays, rays))))
        if not nearest >= self.near_m:
            raise BodyError(
                what=f"a microphone {nearest:.4g} m from the body, closer than {self.near_m:.4g} m",
                where=f"body {self.body!r}",
                fix=f"move the microphone at least {self.near_m:.2g} m away from the body",
            )
        return rays

    def chunks(self) -> Iterator[slice]:
        """Slices of the sounding modes, small enough that modes times samples stay bounded."""
        step = max(1, CHUNK // max(1, len(self.points_m)))
        for begin in range(0, self.count, step):
            yield slice(begin, min(begin + step, self.count))

    def padded(self, weights: NDArray[np.complex128]) -> NDArray[np.complex128]:
        """Weights of the sounding modes (h,) with zeros for the silent ones (m,)."""
        full = np.zeros(self.modes, dtype=np.complex128)
        full[self.first : self.first + self.count] = weights
        return full


@dataclass(frozen=True, slots=True)
class Phasor:
    """Cosine and sine of an array of angles."""

    cosine: Array
    sine: Array


def phasor(angle: Array) -> Phasor:
    """Cosine and sine to 1e-7.

    Single precision is thirty times as fast here, and a microphone before a turning body
    needs hundreds of sums over all modes and samples. Whole turns are taken off in double precision
    first, so that the error does not grow with distance: it stays 130 dB below what the samples
    would make together.
    """
    turns = angle / (2.0 * np.pi)
    turns -= np.rint(turns)
    rest = (2.0 * np.pi * turns).astype(np.float32)
    return Phasor(np.cos(rest).astype(np.float64), np.sin(rest).astype(np.float64))


def samples_of(body: Body, modes: ModeSet, air: Air) -> Samples:
    """Sample a body's radiator."""
    return Samples(
        body=body.name,
        points_m=body.radiator.points_m,
        wavenumber_1_m=modes.omega[_sounding(modes)] / air.speed_m_s,
        modes=modes.count,
        first=modes.swing,
        near_m=near_m(body),
        air=air,
    )


def motion_of(body: Body, modes: ModeSet) -> Array:
    """Displacement (3, h, n) of the radiating samples in each sounding mode, kg**-0.5."""
    points = body.radiator.points_m
    moved = np.asarray(body.probe(points) @ modes.shape[:, _sounding(modes)])
    return np.ascontiguousarray(moved.reshape(len(points), 3, -1).transpose(1, 2, 0))


def _sounding(modes: ModeSet) -> slice:
    return slice(modes.swing, max(modes.heard, modes.swing))


def near_m(body: Body) -> float:
    """How close to a body's samples a microphone may come, m.

    Faces: the side of the largest sample. Lines: the distance between slices, or the distance from
    the line to the surface where that is more.
    """
    radiator = body.radiator
    if radiator.kind != "dipoles":
        return float(np.sqrt(np.max(radiator.weights[:, 0])))
    steps = np.linalg.norm(np.diff(radiator.points_m, axis=0), axis=1)
    spacing = float(np.max(steps)) if len(steps) else 0.0
    surface = body.surface.points_m
    reach = 0.0
    for begin in range(0, len(surface), 4096):
        part = surface[begin : begin + 4096, None, :] - radiator.points_m
        reach = max(reach, float(np.sqrt(np.einsum("sni,sni->sn", part, part).min(axis=1).max())))
    return max(spacing, reach)


def simple_sources(
    samples: Samples, motion: Array, spread: Array, *, distance_m: Array, reference_m: float
) -> NDArray[np.complex128]:
    """Sum simple sources: (m,) of all modes, silent ones zero.

    Parameters
    ----------
    samples : Samples
        Samples of the surface.
    motion : Array
        (h, n) displacement along the outward normal in each sounding mode, kg**-0.5.
    spread : Array
        (n,) pressure times distance over acceleration, over the distance, of each sample.
    distance_m, reference_m : Array, float
        (n,) distance of each sample, and the one whose delay is left out of the phases.
    """
    heard = np.empty(samples.count, dtype=np.complex128)
    for part in samples.chunks():
        turned = phasor(samples.wavenumber_1_m[part, None] * (reference_m - distance_m))
        heard[part].real = (motion[part] * turned.cosine) @ spread
        heard[part].imag = (motion[part] * turned.sine) @ spread
    return samples.padded(heard)
