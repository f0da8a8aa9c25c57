"""The modes of one body: the common currency of every later room."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from resonate.errors import ModesError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]


def _frozen(values: Array) -> Array:
    copy = np.array(values, dtype=np.float64, order="C")
    copy.setflags(write=False)
    return copy


@dataclass(frozen=True, slots=True)
class Decay:
    """Decay rates (m,), 1/s, kept apart by cause; amplitudes fall as exp(-rate t)."""

    material: Array
    thermoelastic: Array
    support: Array
    radiation: Array

    def __post_init__(self) -> None:
        """Copy, freeze and check."""
        for name in ("material", "thermoelastic", "support", "radiation"):
            values = _frozen(getattr(self, name))
            if not np.all(np.isfinite(values)) or np.any(values < 0.0):
                raise ModesError(
                    what=f"a negative or non-finite decay rate from {name}",
                    where="modes",
                    fix="check the loss factor and the dashpots",
                )
            object.__setattr__(self, name, values)

    @property
    def total(self) -> Array:
        """Sum over the causes (m,), 1/s."""
        return self.material + self.thermoelastic + self.support + self.radiation


@dataclass(frozen=True, slots=True)
class ModeSet:
    """Elastic modes and rigid motions of one body.

    Parameters
    ----------
    body, key : str
        Name and content hash of the body they belong to.
    omega : Array
        (m,) undamped angular frequencies, rad/s, ascending, positive.
    shape : Array
        (d, m) mass-normalised shapes over all freedoms, kg**-0.5.
    rigid : Array
        (d, r) mass-normalised motions without stiffness, M-orthonormal (r = 6 for a free body).
    decay : Decay
        Decay rates by cause.
    residual : Array
        (m,) ``|K phi - omega^2 M phi| / |K phi|``, both in the norm of ``(K + s M)^-1`` with a very
        small s: the root of an energy. (In the plain norm rounding in the stiffest freedoms, which
        move by next to nothing, would swamp the figure.)
    heard : int
        How many of the modes lie at or below ``heard_hz``; these sound, all of them feel contact.
    heard_hz, solved_hz : float
        The band that sounds, and the highest frequency up to which every mode is present.
    warnings : tuple[str, ...]
        Truncation and mesh budget, with numbers.
    swing : int
        How many of the leading modes are swings of the whole body on its cords (more than 99 % of
        their strain energy sits in the cords). They move and count in every array here and in
        ``heard``, but are no modes of the body and stay out of lists of modes.
    """

    body: str
    key: str
    omega: Array
    shape: Array
    rigid: Array
    decay: Decay
    residual: Array
    heard: int
    heard_hz: float
    solved_hz: float
    warnings: tuple[str, ...] = ()
    swing: int = 0

    def __post_init__(self) -> None:
        """Copy, freeze and check."""
        for name in ("omega", "shape", "rigid", "residual"):
            object.__setattr__(self, name, _frozen(getattr(self, name)))
        good = (
            self.omega.ndim == 1
            and np.shape(self.shape) == (len(self.shape), len(self.omega))
            and self.shape.shape[1] == len(self.omega)
            and len(self.decay.total) == len(self.omega)
            and bool(np.all(np.isfinite(self.omega)))
            and bool(np.all(self.omega > 0.0))
            and bool(np.all(np.diff(self.omega) >= 0.0))
            and bool(np.all(np.isfinite(self.shape)))
            and self.residual.shape == self.omega.shape
            and np.shape(self.rigid) == (len(self.shape), np.size(self.rigid) // max(len(self.shape), 1))
            and len(self.rigid) == len(self.shape)
            and bool(np.all(np.isfinite(self.rigid)))
            and 0 <= self.heard <= len(self.omega)
            and 0 <= self.swing <= len(self.omega)
        )
        if not good:
            raise ModesError(
                what="modes must be finite, positive and ascending, with one shape and decay each",
                where=f"body {self.body!r}",
                fix="this is a defect of the solver; report it with the scene",
            )

    @property
    def count(self) -> int:
        """Number of elastic modes m."""
        return len(self.omega)

    @property
    def frequency_hz(self) -> Array:
        """(m,) undamped frequencies, Hz."""
        return self.omega / (2.0 * np.pi)

    @property
    def t60_s(self) -> Array:
        """(m,) time to fall by 60 dB, s (infinite without loss)."""
        total = self.decay.total
        with np.errstate(divide="ignore"):
            return np.where(total > 0.0, np.log(1000.0) / total, np.inf)
